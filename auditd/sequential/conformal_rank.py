"""Smoothed conformal ranks of runs among the earlier runs of their cell."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from auditd.sequential.earlier_counts import count_earlier

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_PENDING_MAX: Final = 512
"""Values kept unsorted beside a cell's sorted ones, so that one run costs no copy of the whole cell."""

N_RUNS_SORTED_AT_ONCE: Final = 16
"""From so many runs of a cell on, a block merges them at once instead of keeping them pending."""


class CellReference:
    """Earlier values of one cell: sorted ones, and a few recent ones unsorted."""

    __slots__ = ("_n_pending", "_pending", "_sorted")

    def __init__(self) -> None:
        self._sorted = np.empty(0)
        self._pending = np.empty(8)
        self._n_pending = 0

    def count(self, values: FloatArray) -> tuple[IntArray, IntArray, int]:
        """Count the stored values that are smaller than and equal to each of `values`, and all stored."""
        if values.size > N_RUNS_SORTED_AT_ONCE:
            self._merge()
        smaller = np.searchsorted(self._sorted, values, side="left")
        equal = np.searchsorted(self._sorted, values, side="right") - smaller
        pending = self._pending[: self._n_pending, None]
        if self._n_pending:
            smaller = smaller + (pending < values).sum(axis=0)
            equal = equal + (pending == values).sum(axis=0)
        return smaller, equal, self._sorted.size + self._n_pending

    def add(self, values: FloatArray) -> None:
        """Take values in."""
        end = self._n_pending + values.size
        if values.size > N_RUNS_SORTED_AT_ONCE or end > N_PENDING_MAX:
            self._merge(values)
            return
        if end > self._pending.size:
            self._pending = np.resize(self._pending, 2 * end)
        self._pending[self._n_pending : end] = values
        self._n_pending = end

    def _merge(self, more: FloatArray | None = None) -> None:
        parts = [self._sorted, self._pending[: self._n_pending]]
        if more is not None:
            parts.append(more)
        if sum(part.size for part in parts[1:]) == 0:
            return
        # A stable sort finds the long sorted run and only merges into it.
        new = np.sort(np.concatenate(parts[1:]))
        self._sorted = np.sort(np.concatenate((self._sorted, new)), kind="stable")
        self._n_pending = 0


class ConformalRanks:
    """Ranks runs among the earlier runs of their cell, block after block.

    p = (#{earlier smaller} + U·(1 + #{earlier equal})) / n, n counting the run itself. If a cell's runs are
    exchangeable, the p are independent and uniform, whatever the law of the values; this is the second place
    on which the guarantee rests.

    References
    ----------
    Vovk, Gammerman & Shafer (2005), Algorithmic Learning in a Random World, theorem 8.1 (first edition;
    smoothed p-values are independent and uniform).
    """

    def __init__(self) -> None:
        self._cells: list[CellReference] = []

    def rank(self, values: FloatArray, cells: IntArray, uniform: FloatArray) -> tuple[FloatArray, IntArray]:
        """Give p and the count of earlier runs that it ranks among; the runs then join the reference.

        Parameters
        ----------
        values : (n,) finite values in order.
        cells : (n,) codes of the cells.
        uniform : (n,) randomisers in (0, 1).
        """
        if values.size == 0:
            return np.empty(0), np.empty(0, dtype=np.int64)
        self._cells.extend(CellReference() for _ in range(int(cells.max()) + 1 - len(self._cells)))
        smaller, equal, earlier = self._within_block(values, cells)
        by_cell = np.argsort(cells, kind="stable")
        in_order = cells[by_cell]
        first = np.flatnonzero(np.append(True, in_order[1:] != in_order[:-1]))
        for at in np.split(by_cell, first[1:]):
            reference = self._cells[cells[at[0]]]
            stored_smaller, stored_equal, n_stored = reference.count(values[at])
            smaller[at] += stored_smaller
            equal[at] += stored_equal
            earlier[at] = n_stored + np.arange(at.size)
            reference.add(values[at])
        p = (smaller + uniform * (1 + equal)) / (earlier + 1)
        return p, earlier

    @staticmethod
    def _within_block(values: FloatArray, cells: IntArray) -> tuple[IntArray, IntArray, IntArray]:
        if values.size == 1:
            zero = np.zeros(1, dtype=np.int64)
            return zero, zero.copy(), zero.copy()
        smaller, equal = count_earlier(values, cells)
        return smaller, equal, np.zeros(values.size, dtype=np.int64)

    def learn(self, values: FloatArray, cells: IntArray) -> None:
        """Take runs into the reference without ranking them."""
        self._cells.extend(CellReference() for _ in range(int(cells.max(initial=-1)) + 1 - len(self._cells)))
        for code in np.unique(cells):
            self._cells[code].add(values[cells == code])
