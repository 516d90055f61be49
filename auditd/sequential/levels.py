"""Labels to codes in order of appearance, and runs grouped by their level."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

IntArray = npt.NDArray[np.int64]
FloatArray = npt.NDArray[np.float64]


class LevelCodes(dict[str, int]):
    """Code of each label; a label seen for the first time gets the next code."""

    def __missing__(self, label: str) -> int:
        code = len(self)
        self[label] = code
        return code

    def encode(self, labels: Sequence[str]) -> IntArray:
        """Give the codes of labels, taking new ones in."""
        return np.fromiter(map(self.__getitem__, labels), dtype=np.int64, count=len(labels))


@dataclass(frozen=True, kw_only=True)
class Grouping:
    """Scored runs of a block, put level after level.

    Attributes
    ----------
    code : (n,) level of each run, in order.
    by_level : (n,) positions of the runs, sorted by level, in order within a level.
    first : (k,) where in `by_level` each level present begins.
    level : (k,) codes of the levels present.
    count : (n,) earlier scored runs of the level, in the order of `by_level`.
    n_runs : (k,) runs of each level in the block.
    n_levels : levels seen so far.
    """

    code: IntArray
    by_level: IntArray
    first: IntArray
    level: IntArray
    count: IntArray
    n_runs: IntArray
    n_levels: int


def group(code: IntArray, n_earlier: IntArray) -> Grouping:
    """Group a block's runs; n_earlier[level] is the count of scored runs of each level before the block."""
    by_level = np.argsort(code, kind="stable")
    in_order = code[by_level]
    new = np.ones(code.size, dtype=bool)
    np.not_equal(in_order[1:], in_order[:-1], out=new[1:])
    first = np.flatnonzero(new)
    n_runs = np.diff(np.append(first, code.size))
    level = in_order[first]
    count = np.arange(code.size) - np.repeat(first - n_earlier[level], n_runs)
    return Grouping(
        code=code,
        by_level=by_level,
        first=first,
        level=level,
        count=count,
        n_runs=n_runs,
        n_levels=n_earlier.size,
    )


def grown(array: FloatArray, n_levels: int, fill: float) -> FloatArray:
    """Widen the last axis to n_levels, new places holding `fill`."""
    missing = n_levels - array.shape[-1]
    if missing <= 0:
        return array
    new = np.full((*array.shape[:-1], missing), fill)
    return np.concatenate((array, new), axis=-1)
