"""Prior weights of the run at which a dependence begins."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS, START_NORM

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def log_start_weight(count: IntArray) -> FloatArray:
    """Give log π_t for the t-th scored run, t counting from 1."""
    t = count.astype(np.float64)
    return np.log((1.0 - FIRST_START_MASS) / START_NORM) - np.log1p(t) - 2.0 * np.log(np.log(t + 2.0))


def log_unspent(count: IntArray) -> FloatArray:
    """Give the log of the mass that has not started by the t-th scored run: 1 − ½ − π_1 − … − π_t."""
    if count.size == 0:
        return np.empty(0)
    size = 1 << max(10, int(count.max()).bit_length())
    return _log_unspent_table(size)[count]


@lru_cache(maxsize=4)
def _log_unspent_table(size: int) -> FloatArray:
    spent = np.concatenate(([0.0], np.cumsum(np.exp(log_start_weight(np.arange(1, size))))))
    return np.log((1.0 - FIRST_START_MASS) - spent)
