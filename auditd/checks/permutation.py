"""Scores permuted within cells, and p-values from them."""

from __future__ import annotations

from functools import cached_property
from typing import Literal

import numpy as np

from auditd.series.table import Floats, Ints

N_PERMUTATIONS = 999
"""Permutations where the runs are few enough."""
N_VALUES_PERMUTED = 4_000_000
"""Permutations times runs, to bound time and memory; never fewer than N_LEAST permutations."""
N_LEAST = 99


class Permutations:
    """The scores of a series, permuted within cells again and again; the same for the same series.

    Parameters
    ----------
    scores, cells : (n,) scores and codes of the cells, in the series' own order.
    """

    def __init__(self, scores: Floats, cells: Ints) -> None:
        self._scores = scores
        self._cells = cells
        self.n = len(scores)

    @property
    def mean_cell(self) -> float:
        """Mean runs a cell."""
        return self.n / max(len(np.unique(self._cells)), 1)

    @cached_property
    def scores(self) -> Floats:
        """Permuted scores, (times, n)."""
        n_times = int(np.clip(N_VALUES_PERMUTED // max(self.n, 1), N_LEAST, N_PERMUTATIONS))
        rng = np.random.default_rng([self.n, n_times])
        place = np.argsort(self._cells, kind="stable")
        ordered, of_cell = self._scores[place], self._cells[place]
        found = np.empty((n_times, self.n))
        for k in range(n_times):
            found[k, place] = ordered[np.argsort(of_cell + rng.random(self.n))]
        return found


def permutation_pvalue(observed: float, under_null: Floats, law: Literal["normal", "gamma"]) -> float:
    """Return the share of permutations as extreme or more, the observed one too; large is extreme.

    With fewer than 999 of them, which only many runs need, the tail is that of the law with their mean and
    variance: a share of 1/100 could never stand an adjustment across a dozen questions.

    References
    ----------
    Phipson & Smyth (2010), Statistical Applications in Genetics and Molecular Biology 9:39.
    """
    from scipy.special import gammaincc, ndtr

    if len(under_null) >= N_PERMUTATIONS:
        extreme = under_null >= observed - 1e-6 * max(abs(observed), 1e-12)
        return float((extreme.sum() + 1) / (len(under_null) + 1))
    mean, spread = float(under_null.mean()), float(under_null.std(ddof=1))
    if not spread > 0:
        return 1.0
    if law == "normal" or mean <= 0:
        return float(ndtr((mean - observed) / spread))
    shape = (mean / spread) ** 2
    return float(gammaincc(shape, max(observed, 0.0) * shape / mean))
