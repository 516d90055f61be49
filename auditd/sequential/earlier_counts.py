"""Counting earlier smaller and earlier equal values, for all runs of a block at once."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

IntArray = npt.NDArray[np.int64]
FloatArray = npt.NDArray[np.float64]


def count_earlier(values: FloatArray, cells: IntArray) -> tuple[IntArray, IntArray]:
    """Count, for each run, the earlier runs of its cell that are smaller and those that are equal.

    Parameters
    ----------
    values : (n,) finite values in order.
    cells : (n,) codes of the cells.

    Returns
    -------
    smaller, equal : (n,) counts of earlier runs of the same cell; O(n log n) time, no loop over runs.
    """
    n = values.size
    by_cell = np.argsort(cells, kind="stable")
    # Earlier cells get larger keys, so that no run of another cell is ever counted as smaller.
    key_cell, key_value = -cells[by_cell], values[by_cell]
    position = np.arange(n)
    by_key = np.lexsort((-position, key_value, key_cell))
    rank = np.empty(n, dtype=np.int64)
    rank[by_key] = position
    smaller = np.empty(n, dtype=np.int64)
    smaller[by_cell] = _count_earlier_lower_ranks(rank)
    equal = np.empty(n, dtype=np.int64)
    first = np.ones(n, dtype=bool)
    first[1:] = (key_value[by_key][1:] != key_value[by_key][:-1]) | (
        key_cell[by_key][1:] != key_cell[by_key][:-1]
    )
    group = np.cumsum(first) - 1
    ends = np.append(np.flatnonzero(first)[1:], n)
    equal[by_cell[by_key]] = ends[group] - 1 - position  # in a group, the latest run comes first
    return smaller, equal


def _count_earlier_lower_ranks(rank: IntArray) -> IntArray:
    """For a permutation in order, count the earlier entries of lower rank (wavelet descent, bit by bit)."""
    n = rank.size
    counts = np.zeros(n, dtype=np.int64)
    sequence = rank.copy()
    slots = np.arange(n)
    for bit in range(max(n - 1, 1).bit_length() - 1, -1, -1):
        base = (slots >> (bit + 1)) << (bit + 1)
        is_low = ((sequence >> bit) & 1) == 0
        low_before = np.cumsum(is_low) - is_low
        low_in_group = low_before - low_before[base]
        high = ~is_low
        counts[sequence[high]] += low_in_group[high]
        target = np.where(is_low, base + low_in_group, base + (1 << bit) + (slots - base - low_in_group))
        moved = np.empty_like(sequence)
        moved[target] = sequence
        sequence = moved
    return counts[rank]
