"""How a nuisance's levels lie in the cells: what of their differences can be seen at all."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.series.table import Floats, Ints

N_LEVELS_EXACT = 400
"""Levels up to which all pairs of them enter the expectations; beyond, what a pair shares is negligible."""


@dataclass(frozen=True, kw_only=True)
class Layout:
    """Expectations of sums of squares of residuals from the cells' means, under a random effect of levels.

    With r the residuals and S_h their sum on level h: E Σ S_h²/n_h = df · σ² + weight · σ_b², and
    E Σ r² = (n − cells) · σ² + spread · σ_b².
    """

    df: float
    df_within: float
    weight: float
    spread: float


def layout(cells: Ints, levels: Ints) -> Layout:
    """Return the expectations for runs in cells (n,) and on levels (n,).

    References
    ----------
    Searle, Casella & McCulloch (1992), Variance Components, 5.5 (Henderson's method 3).
    """
    cell = np.unique(cells, return_inverse=True)[1]
    level = np.unique(levels, return_inverse=True)[1]
    n_cells, n_levels = int(cell.max()) + 1, int(level.max()) + 1
    slots, counts = np.unique(cell * n_levels + level, return_counts=True)
    of_cell, of_level = slots // n_levels, slots % n_levels
    in_cell = np.bincount(cell).astype(np.float64)
    on_level = np.bincount(level).astype(np.float64)
    diagonal = on_level - np.bincount(of_level, counts**2 / in_cell[of_cell], minlength=n_levels)
    df = float((diagonal / on_level).sum())
    spread = float(diagonal.sum())
    if n_levels <= N_LEVELS_EXACT:
        weight = _weight(of_cell, of_level, counts.astype(np.float64), in_cell, on_level)
    else:
        weight = spread
    return Layout(df=df, df_within=len(cells) - n_cells - df, weight=weight, spread=spread)


def _weight(of_cell: Ints, of_level: Ints, counts: Floats, in_cell: Floats, on_level: Floats) -> float:
    """Return Σ (A²)_hh / n_h for A = Z'(I − P)Z, Z the levels' and P the cells' projection."""
    from scipy.sparse import csr_array

    table = csr_array((counts, (of_cell, of_level)), shape=(len(in_cell), len(on_level)))
    scaled = csr_array((counts / in_cell[of_cell], (of_cell, of_level)), shape=table.shape)
    a = np.diag(on_level) - (table.T @ scaled).toarray()
    return float(((a * a).sum(axis=0) / on_level).sum())
