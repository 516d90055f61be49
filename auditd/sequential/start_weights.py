"""Prior weights of the run at which a dependence begins."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import START_NORM

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def log_start_weight(count: IntArray) -> FloatArray:
    """Give log π_t for the t-th scored run, t counting from 1; the π sum to at most 1.

    The heaviest tail that still sums, near enough, so that a late change costs little more than an early one
    (after the universal prior for integers of Rissanen 1983, Annals of Statistics 11).
    """
    t = count.astype(np.float64)
    weight: FloatArray = -np.log(START_NORM) - np.log1p(t) - 2.0 * np.log(np.log(t + 2.0))
    return weight


def log_unstarted(count: IntArray) -> FloatArray:
    """Give the log of the mass that has not started by the t-th scored run: 1 − π_1 − … − π_t."""
    size = 1 << max(10, int(count.max(initial=0)).bit_length())
    return _log_unstarted_table(size)[count]


@lru_cache(maxsize=4)
def _log_unstarted_table(size: int) -> FloatArray:
    started = np.concatenate(([0.0], np.cumsum(np.exp(log_start_weight(np.arange(1, size))))))
    table: FloatArray = np.log1p(-started)
    return table
