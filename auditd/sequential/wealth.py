"""Wealth of bets whose starts are mixed, in logarithms."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS
from auditd.sequential.start_weights import log_start_weight, log_unstarted

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_RUNS_AT_ONCE = 256
"""Runs whose wealths are summed as plain numbers: few enough that their logarithms span little."""

LARGEST_LOG_RANGE = 600.0
"""Nats that one sum of plain numbers may span: exp(−745) is float64's smallest number. Wider spans are summed
in logarithms."""


def grow_wealth(
    log_wealth: FloatArray, log_l: FloatArray, log_start: FloatArray, log_late: FloatArray
) -> FloatArray:
    """Follow S_t = (S_{t−1} + π_t)·L_t over a block.

    Under exchangeability each S plus the mass not yet started is a non-negative martingale of mean 1, since
    every L has conditional mean 1 and every π is fixed beforehand. This is one of the places on which the
    guarantee rests.

    Parameters
    ----------
    log_wealth : (G,) log S before the block.
    log_l : (G, n) log L.
    log_start : (n,) log π.
    log_late : (G, 1) log of the mass that later starts share: what multiplies π.

    Returns
    -------
    path : (G, n) log S after each run.
    """
    if log_start.size == 1:
        single: FloatArray = np.logaddexp(log_wealth[:, None], log_start + log_late) + log_l
        return single
    path = np.empty_like(log_l)
    for begin in range(0, log_start.size, N_RUNS_AT_ONCE):
        part = slice(begin, begin + N_RUNS_AT_ONCE)
        path[:, part] = _grow(log_wealth, log_l[:, part], log_start[part] + log_late)
        log_wealth = path[:, part][:, -1]
    return path


def _grow(log_wealth: FloatArray, log_l: FloatArray, log_start: FloatArray) -> FloatArray:
    """Follow the wealths over few runs: S_t = Π_{v ≤ t} L_v · (S_0 + Σ_{u ≤ t} π_u / Π_{v < u} L_v)."""
    total = np.cumsum(log_l, axis=1)
    started = np.empty((log_l.shape[0], log_l.shape[1] + 1))
    started[:, 0] = log_wealth
    started[:, 1:] = log_start
    started[:, 2:] -= total[:, :-1]
    top = started.max(axis=1, keepdims=True)
    if float((top[:, 0] - started.min(axis=1)).max()) > LARGEST_LOG_RANGE:
        grown: FloatArray = np.logaddexp.accumulate(started, axis=1)[:, 1:]
        grown += total
        return grown
    started -= top
    summed = np.cumsum(np.exp(started, out=started), axis=1)[:, 1:]
    np.log(summed, out=summed)
    summed += top
    summed += total
    return summed


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
    mean: FloatArray = log_sum(paths) - np.log(paths.shape[0])
    return mean


class FamilyRows:
    """Which rows of a stack of grids belong to which family, and how each family's starts are mixed.

    Attributes
    ----------
    sizes : (families,) grid points of each.
    log_first : (families,) log of the mass of the first start.
    log_late : (families, 1) log of the mass of later starts.
    """

    def __init__(self, families: Sequence[tuple[str, int]]) -> None:
        self.sizes = np.array([size for _, size in families], dtype=np.int64)
        first = np.array([FIRST_START_MASS[kind] for kind, _ in families])
        self.log_first = np.log(first)
        self.log_late = np.log1p(-first)[:, None]
        self._first_row = np.cumsum(self.sizes) - self.sizes
        self._log_size = np.log(self.sizes)[:, None]

    def by_row(self, by_family: FloatArray) -> FloatArray:
        """Repeat what belongs to each family for its rows."""
        return np.repeat(by_family, self.sizes, axis=0)

    def log_mean(self, path: FloatArray) -> FloatArray:
        """Give the log of each family's mean over its rows, (families, n)."""
        top = np.maximum.reduceat(path, self._first_row, axis=0)
        sums = np.add.reduceat(np.exp(path - self.by_row(top)), self._first_row, axis=0)
        mean: FloatArray = np.log(sums) + top - self._log_size
        return mean


class StartMixture:
    """Wealths of all families' grids over the whole order."""

    def __init__(self, families: Sequence[tuple[str, int]]) -> None:
        self._rows = FamilyRows(families)
        self._late = self._rows.by_row(self._rows.log_late)
        self.log_wealth = self._rows.by_row(self._rows.log_first)

    def follow(self, log_l: FloatArray, count: IntArray) -> FloatArray:
        """Give each family's log e-value after each run, (families, n); count is 1-based.

        It is the mean of the family's wealths plus the mass that has not started.
        """
        path = grow_wealth(self.log_wealth, log_l, log_start_weight(count), self._late)
        self.log_wealth = path[:, -1].copy()
        log_e: FloatArray = np.logaddexp(
            self._rows.log_mean(path), self._rows.log_late + log_unstarted(count)
        )
        return log_e
