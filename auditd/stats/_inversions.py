"""Inversions of a permutation (pairs whose order is turned round), counted bit by bit on whole arrays."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def count_inversions(permutation: NDArray[np.int64]) -> int:
    """Number of pairs i < j with p_i > p_j, for p a permutation of 0 … n − 1; O(n log n).

    Values are split by their highest bit, keeping their order, then each half by its next bit, and so on. Two
    values part at the highest bit in which they differ; they are an inversion if the one with the bit set
    stands first. Padding to a power of two with ascending values adds none.
    """
    n_bits = max(1, int(permutation.size - 1).bit_length())
    size = 1 << n_bits
    # Numbers of 32 bits halve the time; no series has 2³¹ runs.
    values = np.arange(size, dtype=np.int32)
    values[: permutation.size] = permutation
    total = 0
    for bit in range(n_bits - 1, -1, -1):
        half = 1 << bit
        n_sets = size >> (bit + 1)
        is_one = (values & half) != 0
        is_zero = ~is_one
        ones_so_far = np.cumsum(is_one, dtype=np.int32)
        # Each set holds exactly `half` ones, so those of earlier sets are known without counting.
        earlier = half * half * (n_sets * (n_sets - 1) // 2)
        total += int(ones_so_far[is_zero].sum(dtype=np.int64)) - earlier
        split = np.empty((n_sets, 2, half), dtype=np.int32)
        split[:, 0] = values[is_zero].reshape(n_sets, half)
        split[:, 1] = values[is_one].reshape(n_sets, half)
        values = split.ravel()
    return total
