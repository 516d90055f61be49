"""Wealth of bets whose starts are mixed, in logarithms."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS
from auditd.sequential.start_weights import log_start_weight, log_unspent

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_FIRST_START = float(np.log(FIRST_START_MASS))


def grow_wealth(log_wealth: FloatArray, log_l: FloatArray, log_start: FloatArray) -> FloatArray:
    """Follow S_t = (S_{t−1} + π_t)·L_t over a block.

    Under exchangeability each S plus the mass not yet started is a non-negative martingale of mean 1, since
    every L has conditional mean 1 and every π is fixed beforehand. This is one of the places on which the
    guarantee rests.

    Parameters
    ----------
    log_wealth : (G,) log S before the block.
    log_l : (G, n) log L.
    log_start : (n,) log π.

    Returns
    -------
    path : (G, n) log S after each run.
    """
    if log_start.size == 1:
        single: FloatArray = np.logaddexp(log_wealth, log_start)[:, None] + log_l
        return single
    total = np.cumsum(log_l, axis=1)
    started = np.empty((log_l.shape[0], log_l.shape[1] + 1))
    started[:, 0] = log_wealth
    started[:, 1] = log_start[0]
    np.subtract(log_start[1:], total[:, :-1], out=started[:, 2:])
    path: FloatArray = np.logaddexp.accumulate(started, axis=1)[:, 1:]
    path += total
    return path


def log_sum(paths: FloatArray) -> FloatArray:
    """Give the log of the sum of exp(paths) over the first axis; rows of −inf add nothing."""
    top = paths.max(axis=0)
    top[top == -np.inf] = 0.0
    with np.errstate(divide="ignore"):
        summed: FloatArray = np.log(np.exp(paths - top).sum(axis=0))
    summed += top
    return summed


def log_mean(paths: FloatArray) -> FloatArray:
    """Give the log of the mean of exp(paths) over the first axis."""
    return log_sum(paths) - np.log(paths.shape[0])


class FamilyRows:
    """Which rows of a stack of grids belong to which family.

    Attributes
    ----------
    sizes : (families,) grid points of each.
    """

    def __init__(self, sizes: list[int]) -> None:
        self.sizes = np.array(sizes, dtype=np.int64)
        self._first = np.cumsum(self.sizes) - self.sizes
        self._log_size = np.log(self.sizes)[:, None]

    @property
    def n_rows(self) -> int:
        """Rows of the stack."""
        return int(self.sizes.sum())

    def log_e(self, path: FloatArray, unspent: FloatArray) -> FloatArray:
        """Give each family's log e-value, (families, n): the mean of its wealths plus the unspent mass."""
        top = np.maximum.reduceat(path, self._first, axis=0)
        sums = np.add.reduceat(np.exp(path - np.repeat(top, self.sizes, axis=0)), self._first, axis=0)
        return np.logaddexp(np.log(sums) + top - self._log_size, unspent)


class StartMixture:
    """Wealths of all families' grids over the whole order."""

    def __init__(self, sizes: list[int]) -> None:
        self._rows = FamilyRows(sizes)
        self.log_wealth = np.full(self._rows.n_rows, LOG_FIRST_START)

    def follow(self, log_l: FloatArray, count: IntArray) -> FloatArray:
        """Give each family's log e-value after each run, (families, n); count is 1-based."""
        path = grow_wealth(self.log_wealth, log_l, log_start_weight(count))
        self.log_wealth = path[:, -1].copy()
        return self._rows.log_e(path, log_unspent(count))
