"""A series in one of its orders, on the scale on which the full audit asks.

Values enter as normal scores of their ranks within their cells, so that no check rests on the errors' law,
and cells with other levels or spreads do not count as dependence.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from auditd.checks.permutation import Permutations
from auditd.series.table import Floats, Ints, Series

SMALL_CELL = 20.0
"""Mean runs a cell below which p-values come from permutations within cells: taking off a cell's level ties
its few scores together, which sorted lists of cells would show as dependence."""
N_PERMUTED_MAX = 100_000
"""Runs up to which permutations are affordable; above, the ties' share in the mean is taken off instead."""


@dataclass(frozen=True, kw_only=True)
class View:
    """One response in one order.

    Attributes
    ----------
    along : `order`, `start`, `finish`, `seed`, or a nuisance within or between whose levels is asked.
    rows : (n,) indices of the runs within the series.
    scores : (n,) normal scores within cells, in this order.
    values : (n,) residuals from the cells' means on the audited scale, in this order.
    cells : (n,) codes of the cells, in this order.
    n_in_cell : (n,) runs of the series in each run's cell.
    groups, levels : (n,) codes of the nuisance's levels and their names, for a view along one.
    permuted : scores of the whole series permuted within cells, made when first asked for.
    why_not : why this order cannot be asked, or None.
    """

    series: Series
    along: str
    rows: Ints
    scores: Floats
    values: Floats
    cells: Ints
    n_in_cell: Ints
    permuted: Permutations
    groups: Ints | None = None
    levels: tuple[str, ...] = ()
    why_not: str | None = None

    @property
    def times(self) -> Floats:
        """Starts in this order, POSIX seconds; NaN where not stated."""
        return self.series.started[self.rows]

    @property
    def n(self) -> int:
        """The number of runs."""
        return len(self.scores)

    def in_order(
        self, rows: Ints, along: str, *, groups: Ints | None = None, levels: tuple[str, ...] = ()
    ) -> View:
        """Return the view in another order, given as indices into this one."""
        return replace(
            self,
            along=along,
            rows=self.rows[rows],
            scores=self.scores[rows],
            values=self.values[rows],
            cells=self.cells[rows],
            n_in_cell=self.n_in_cell[rows],
            groups=None if groups is None else groups[rows],
            levels=levels,
        )

    @property
    def needs_permutation(self) -> bool:
        """Whether cells are so small that p-values come from permutations within them."""
        return self.permuted.mean_cell < SMALL_CELL and self.permuted.n <= N_PERMUTED_MAX

    def permutations(self) -> Floats:
        """Return the scores permuted within cells, in this order: (times, n); not to be written to."""
        scores = self.permuted.scores
        if self.n == self.permuted.n and np.array_equal(self.rows, np.arange(self.n)):
            return scores
        return scores[:, self.rows]

    def tied(self, lag: int) -> float:
        """Return minus what Σ s(t) s(t + lag) would be on average in random order within cells.

        Scores of a cell sum to nothing, so that any two of its m have a mean product of −1 / (m − 1).
        """
        same = self.cells[:-lag] == self.cells[lag:]
        return float((1.0 / np.maximum(self.n_in_cell[lag:][same] - 1, 1)).sum())


def whole(series: Series) -> View:
    """Return a series in its audit order."""
    n = len(series.values)
    cells = series.cells.codes
    scores = normal_scores(series.values, cells)
    return View(
        series=series,
        along="order",
        rows=np.arange(n),
        scores=scores,
        values=residuals(series.values, cells),
        cells=cells,
        n_in_cell=np.bincount(cells)[cells],
        permuted=Permutations(scores, cells),
        why_not=None if series.ordered else "no order can be established: runs landed in whole tables",
    )


def residuals(values: Floats, cells: Ints) -> Floats:
    """Return values less their cells' means."""
    counts = np.maximum(np.bincount(cells), 1)
    shifted = values - values[0] if len(values) else values
    once = shifted - (np.bincount(cells, shifted) / counts)[cells]
    return once - (np.bincount(cells, once) / counts)[cells]


def normal_scores(values: Floats, cells: Ints) -> Floats:
    """Return Φ⁻¹(rank / (n_c + 1)) within cells, ties by mean ranks, standardised within each cell."""
    from scipy.special import ndtri

    order = np.lexsort((values, cells))
    of_cell, ordered = cells[order], values[order]
    starts = np.flatnonzero(np.diff(of_cell, prepend=-1))
    sizes = np.diff(np.append(starts, len(cells)))
    rank = np.arange(1.0, len(cells) + 1) - np.repeat(starts, sizes)
    first = np.flatnonzero((np.diff(of_cell, prepend=-1) != 0) | (np.diff(ordered, prepend=np.nan) != 0))
    lengths = np.diff(np.append(first, len(cells)))
    rank = np.repeat(rank[first] + (lengths - 1) / 2, lengths)
    found = ndtri(rank / (np.repeat(sizes, sizes) + 1.0))
    centred = found - np.repeat(np.add.reduceat(found, starts) / sizes, sizes) if len(cells) else found
    spread = np.repeat(np.sqrt(np.add.reduceat(centred**2, starts) / sizes), sizes) if len(cells) else found
    scores = np.empty(len(cells))
    scores[order] = np.where(spread > 1e-9, centred / np.where(spread > 1e-9, spread, 1.0), 0.0)
    return scores


def segments(groups: Ints) -> list[slice]:
    """Return the stretches of equal codes, in order."""
    bounds = np.flatnonzero(np.diff(groups, prepend=-1, append=-1))
    return [slice(int(start), int(end)) for start, end in pairwise(bounds.tolist())]
