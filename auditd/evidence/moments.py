"""Sums from which generalised least squares with AR(1) errors is computed for any coefficient, in one pass
over the runs.

With e_t = y_t − φ·y_parent(t), every product sum of the whitened data is a quadratic in φ: S(φ) = S0 − φ·S1
+ φ²·S2. Runs are first gathered by `code` (their combination of cell and nuisance levels), so that the sums
over n runs cost O(n) whatever the number of columns.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.chains import Chains
from auditd.evidence.inputs import Floats, Ints


@dataclass(frozen=True, kw_only=True)
class Moments:
    """Quadratics in φ: matrices (k, k), right-hand sides (k,), squares of y; n runs in n_starts chains."""

    matrix: tuple[Floats, Floats, Floats]
    right: tuple[Floats, Floats, Floats]
    square: tuple[float, float, float]
    n: int
    n_starts: int

    def select(self, columns: Ints) -> Moments:
        """The same sums for some of the columns."""
        grid = np.ix_(columns, columns)
        return Moments(
            matrix=(self.matrix[0][grid], self.matrix[1][grid], self.matrix[2][grid]),
            right=(self.right[0][columns], self.right[1][columns], self.right[2][columns]),
            square=self.square,
            n=self.n,
            n_starts=self.n_starts,
        )


def sum_moments(y: Floats, code: Ints, table: Floats, chains: Chains) -> Moments:
    """Sum up the runs.

    Parameters
    ----------
    y : (n,) response, centred and scaled by the caller.
    code : (n,) row of `table` for each run.
    table : (K, k) the design's row for each code.
    """
    n_codes = table.shape[0]
    child, parent, starts = code[chains.child], code[chains.parent], code[chains.starts]
    y_child, y_parent, y_starts = y[chains.child], y[chains.parent], y[chains.starts]
    linked = (
        np.bincount(child * n_codes + parent, minlength=n_codes * n_codes)
        .reshape(n_codes, n_codes)
        .astype(float)
    )
    lagged = table.T @ linked @ table
    inner = np.bincount(parent, minlength=n_codes) - np.bincount(starts, minlength=n_codes)
    crossed = np.bincount(child, y_parent, n_codes) + np.bincount(parent, y_child, n_codes)
    inner_y = np.bincount(parent, y_parent, n_codes) - np.bincount(starts, y_starts, n_codes)
    count = np.bincount(code, minlength=n_codes)
    return Moments(
        matrix=((table.T * count) @ table, lagged + lagged.T, (table.T * inner) @ table),
        right=(table.T @ np.bincount(code, y, n_codes), table.T @ crossed, table.T @ inner_y),
        square=(
            float(y @ y),
            2 * float(y_child @ y_parent),
            float(y_parent @ y_parent - y_starts @ y_starts),
        ),
        n=len(y),
        n_starts=len(starts),
    )
