"""Unequal spread, of the cells and of the two sides.

The sides' is Welch's correction carried over to generalised least squares.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Floats, Ints

MIN_OWN_RUNS = 5  # runs of a cell from which its residuals are taken in its own standard deviation
SAME = 1e-20  # variance ÷ pooled variance below which a cell's values differ by rounding only
MIN_SIDE_DF = 3  # innovations beyond the cells' means that a side needs for a variance of its own


@dataclass(frozen=True, kw_only=True)
class SideSpread:
    """Variance with each side's own innovation variance ÷ with a common one, and degrees of freedom."""

    ratio: float
    df: float


def by_side(
    error: Floats, weight: Floats, side: Floats, cell: Ints, unit: float, sigma2: float, df: float
) -> SideSpread:
    """Let a, b and the other cells have a variance each.

    With φ = 0 and no nuisance this is Welch's variance and Satterthwaite's degrees of freedom exactly.

    Parameters
    ----------
    error, weight : (n,) innovations, and their weights in the estimate.
    unit, sigma2, df : variance of the estimate ÷ innovation variance, the common innovation variance, its
        degrees of freedom.
    """
    total, spent, own = 0.0, 0.0, 0.0
    for value in (-0.5, 0.0, 0.5):
        members = side == value
        pull = float(weight[members] @ weight[members])
        if pull <= 0:
            continue
        n_cells = int((np.bincount(cell[members]) > 0).sum())
        side_df = int(members.sum()) - n_cells
        if side_df < MIN_SIDE_DF:
            return SideSpread(ratio=1.0, df=df)
        part = pull * float(error[members] @ error[members]) / side_df
        total += part
        own += pull
        spent += part * part / side_df
    if total <= 0 or own <= 0:
        return SideSpread(ratio=1.0, df=df)
    # degrees of freedom spent on blocks are taken off in proportion
    n_side_df = len(error) - len(np.unique(cell))
    lost = df / max(n_side_df, 1)
    rest = max(unit - own, 0.0) * sigma2
    ratio = (total / lost + rest) / (unit * sigma2)
    return SideSpread(ratio=ratio, df=min(max(total * total / spent * lost, 1.0), df))


def in_own_spread(residual: Floats, cell: Ints, count: Floats) -> Floats:
    """Residuals (of unit pooled variance) in standard deviations of their cells; small cells share theirs.

    A cell that does not vary stays as it is. The result has unit pooled variance.
    """
    square = np.bincount(cell, residual**2, len(count))
    small = count < MIN_OWN_RUNS
    variance = square / np.maximum(count - 1, 1)
    variance[small] = square[small].sum() / max(float((count[small] - 1).sum()), 1.0)
    scaled = residual / np.sqrt(np.where(variance > SAME, variance, 1.0))[cell]
    return np.asarray(scaled / (float(scaled @ scaled) / (len(cell) - len(count))) ** 0.5)
