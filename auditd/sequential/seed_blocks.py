"""Seed blocks (common random numbers): audited as block means in order, and as contrasts within blocks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput
from auditd.sequential.run_block import labels, numbers

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class SeedBlocks:
    """Two series made of one response with intended common seeds, for the blocks completed so far.

    Attributes
    ----------
    mean : (m,) mean of each complete block, in the order of completion; all are one cell.
    mean_index : (m,) index of the run that completed the block: its place in the order.
    contrast : (m·(k−1),) within each block, each cell's value against the mean of the cells before it in the
        stated order of the k cells, block after block.
    contrast_cells : label of the cell of each contrast; the first cell has none.
    contrast_index : index of the run of each contrast, for its host and other labels.
    """

    mean: FloatArray
    mean_index: IntArray
    contrast: FloatArray
    contrast_cells: list[str]
    contrast_index: IntArray


class SeedBlockBuilder:
    """Completes seed blocks as runs arrive.

    Runs of one seed share its luck, so that single runs are dependent by design. Blocks are independent of
    each other: their means are exchangeable, whatever the law. Contrasts of one cell are exchangeable over
    blocks; those of different cells in one block are independent of each other and of the mean when errors
    are Gaussian with one variance (Helmert's contrasts), otherwise only uncorrelated, so that the error rate
    is then close to the stated one and not bound by it.

    Parameters
    ----------
    cells : the cells that make a block complete, in a stated order.
    """

    def __init__(self, cells: Sequence[str]) -> None:
        if len(cells) < 2 or len(set(cells)) != len(cells):
            raise BadInput(f"a seed block needs two different cells or more, got {list(cells)!r:.200}")
        self._place = {cell: number for number, cell in enumerate(cells)}
        self._cells = list(cells)
        self._n_runs = 0
        self._n_seen: dict[tuple[str, str], int] = {}
        self._open: dict[tuple[str, int], dict[int, tuple[float, int]]] = {}

    def take(self, values: npt.ArrayLike, cells: object, seeds: object) -> SeedBlocks:
        """Take the next runs in audit order; give the blocks that they complete.

        Values that are not finite, and cells that no block needs, are passed over. A seed that comes again in
        the same cell belongs to the seed's next block.
        """
        y = numbers(values, "values", ndim=1)
        complete: list[tuple[int, dict[int, tuple[float, int]]]] = []
        names = zip(labels(cells, "cells", y.size), labels(seeds, "seeds", y.size), strict=True)
        for at, (cell, seed) in enumerate(names, start=self._n_runs):
            value = float(y[at - self._n_runs])
            if cell not in self._place or not np.isfinite(value):
                continue
            turn = self._n_seen.get((seed, cell), 0)
            self._n_seen[seed, cell] = turn + 1
            block = self._open.setdefault((seed, turn), {})
            block[self._place[cell]] = (value, at)
            if len(block) == len(self._cells):
                complete.append((at, self._open.pop((seed, turn))))
        self._n_runs += y.size
        return self._series(complete)

    def _series(self, complete: list[tuple[int, dict[int, tuple[float, int]]]]) -> SeedBlocks:
        k = len(self._cells)
        table = np.array([[block[c][0] for c in range(k)] for _, block in complete]).reshape(-1, k)
        index = np.array([[block[c][1] for c in range(k)] for _, block in complete], dtype=np.int64).reshape(
            -1, k
        )
        before = np.cumsum(table, axis=1)[:, :-1] / np.arange(1, k)
        return SeedBlocks(
            mean=table.mean(axis=1),
            mean_index=np.array([at for at, _ in complete], dtype=np.int64),
            contrast=(table[:, 1:] - before).ravel(),
            contrast_cells=self._cells[1:] * len(complete),
            contrast_index=index[:, 1:].ravel(),
        )


def seed_blocks(values: npt.ArrayLike, cells: object, seeds: object) -> SeedBlocks:
    """Give the seed blocks of a whole series; a block is complete when it covers every cell of the series.

    Parameters
    ----------
    values : (n,) response in audit order.
    cells, seeds : (n,) labels.

    Returns
    -------
    SeedBlocks; audit `mean` with `replay(mean, cells=["block"] * m)` and `contrast` with
    `replay(contrast, cells=contrast_cells)`, both as one of twice as many responses.

    Raises
    ------
    BadInput : lengths that differ, or fewer than two cells.
    """
    y = numbers(values, "values", ndim=1)
    named = labels(cells, "cells", y.size)
    return SeedBlockBuilder(sorted(set(named))).take(y, named, seeds)
