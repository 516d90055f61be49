"""A series in one of its orders, on the scale on which the full audit asks.

Values enter as normal scores of their ranks within their cells, so that no check rests on the errors' law,
and cells with other levels or spreads do not count as dependence.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from auditd.series.table import Flags, Floats, Ints, Series

SMALL_CELL = 20.0
"""Mean runs a cell below which p-values come from permutations within cells: taking off a cell's level ties
its few scores together, which sorted lists of cells would show as dependence."""
N_PERMUTATIONS = 999
N_VALUES_PERMUTED = 4_000_000
"""Permutations times runs, to bound the time; never fewer than 99 permutations."""


@dataclass(frozen=True, kw_only=True)
class View:
    """One response in one order.

    Attributes
    ----------
    along : `order`, `start`, `finish`, `seed`, or a nuisance within whose levels the order is taken.
    scores : (n,) normal scores within cells, in this order.
    values : (n,) residuals from the cells' means on the audited scale, in this order.
    cells : (n,) codes of the cells, in this order.
    groups : (n,) codes of the nuisance's levels for a view within them, else None.
    times : (n,) POSIX seconds, NaN where not stated.
    why_not : why this order cannot be asked, or None.
    """

    series: Series
    along: str
    rows: Ints
    scores: Floats
    values: Floats
    cells: Ints
    groups: Ints | None = None
    why_not: str | None = None

    @property
    def times(self) -> Floats:
        """Starts in this order, POSIX seconds."""
        return self.series.started[self.rows]

    @property
    def n(self) -> int:
        """The number of runs."""
        return len(self.scores)

    def in_order(self, rows: Ints, along: str, *, groups: Ints | None = None) -> View:
        """Return the view in another order, given as indices into this one."""
        return replace(
            self,
            along=along,
            rows=self.rows[rows],
            scores=self.scores[rows],
            values=self.values[rows],
            cells=self.cells[rows],
            groups=None if groups is None else groups[rows],
        )

    @property
    def needs_permutation(self) -> bool:
        """Whether cells are so small that p-values come from permutations within them."""
        return self.n / max(len(np.unique(self.cells)), 1) < SMALL_CELL

    def permutations(self) -> list[Floats]:
        """Return the scores permuted within cells, again and again; the same for the same view."""
        n_times = int(np.clip(N_VALUES_PERMUTED // max(self.n, 1), 99, N_PERMUTATIONS))
        rng = np.random.default_rng([self.n, n_times])
        place = np.argsort(self.cells, kind="stable")
        found = []
        for _ in range(n_times):
            shuffled = np.empty_like(self.scores)
            shuffled[place] = self.scores[np.lexsort((rng.random(self.n), self.cells))]
            found.append(shuffled)
        return found


def whole(series: Series) -> View:
    """Return a series in its audit order."""
    n = len(series.values)
    return View(
        series=series,
        along="order",
        rows=np.arange(n),
        scores=normal_scores(series.values, series.cells.codes),
        values=residuals(series.values, series.cells.codes),
        cells=series.cells.codes,
        why_not=None if series.ordered else "no order can be established: runs landed in whole tables",
    )


def residuals(values: Floats, cells: Ints) -> Floats:
    """Return values less their cells' means."""
    counts = np.bincount(cells)
    return values - (np.bincount(cells, values) / np.maximum(counts, 1))[cells]


def normal_scores(values: Floats, cells: Ints) -> Floats:
    """Return Φ⁻¹(rank / (n_c + 1)) within cells, ties by mean ranks, standardised within each cell."""
    from scipy.special import ndtri
    from scipy.stats import rankdata

    order = np.argsort(cells, kind="stable")
    scores = np.zeros(len(values))
    bounds = np.flatnonzero(np.diff(cells[order], prepend=-1, append=-1))
    for start, end in pairwise(bounds):
        of_cell = order[start:end]
        ranks = rankdata(values[of_cell])
        found = ndtri(ranks / (len(of_cell) + 1))
        spread = float(found.std())
        scores[of_cell] = (found - found.mean()) / spread if spread > 0 else 0.0
    return scores


def permutation_pvalue(observed: float, under_null: NDArray[np.float64]) -> float:
    """Return the share of permutations as extreme or more, the observed one too (Phipson & Smyth 2010)."""
    extreme: Flags = under_null >= observed
    return float((extreme.sum() + 1) / (len(under_null) + 1))
