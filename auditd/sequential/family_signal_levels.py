"""`serial` and `drift` along a nuisance: a latent AR(1) signal within each level, or within one alone."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS, SINGLE_LEVEL_MASS
from auditd.sequential.latent_ar1 import GainTable, log_bets
from auditd.sequential.latest_sum import log_sum_of_latest
from auditd.sequential.levels import Grouping, grown
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import grow_wealth, log_e_of

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def log_level_weight(level: IntArray) -> FloatArray:
    """Give log 1/(j(j+1)) for the j-th level to appear; codes count from 0."""
    j = level.astype(np.float64) + 1.0
    return -np.log(j) - np.log1p(j)


class SignalWithinLevels:
    """Bets that scores follow latent AR(1) signals within the levels of a nuisance.

    Half of the mass bets that every level has its own signal, half that one level alone has; the j-th level
    to appear has 1/(j(j+1)) of the latter, and what no level has claimed stays unspent.
    """

    def __init__(self, kind: str, along: str, table: GainTable) -> None:
        self.kind, self.along = kind, along
        self._table = table
        n_grid = table.carry.shape[0]
        self._mean = np.zeros((n_grid, 0))
        self._count = np.zeros(0)
        self._joint = np.full(n_grid, np.log(FIRST_START_MASS))
        self._single = np.zeros((n_grid, 0))
        self._latest = np.zeros(0)
        self._last: tuple[IntArray, FloatArray, FloatArray] = (
            np.zeros(0, np.int64),
            np.zeros(0),
            np.zeros(0),
        )

    def _widen(self, n_levels: int) -> None:
        self._mean = grown(self._mean, n_levels, 0.0)
        self._count = grown(self._count, n_levels, 0.0)
        self._single = grown(self._single, n_levels, np.log(FIRST_START_MASS))
        self._latest = grown(self._latest, n_levels, -np.inf)

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point in the order of the runs, (grid, n)."""
        groups = block.groups[self.along]
        by_level = self._log_bets_by_level(block, groups)
        log_l = np.empty_like(by_level)
        log_l[:, groups.by_level] = by_level
        return log_l

    def _log_bets_by_level(self, block: ScoredBlock, groups: Grouping) -> FloatArray:
        self._widen(int(groups.level.max()) + 1)
        log_l, mean = log_bets(
            self._table, block.z[groups.by_level], groups.count, groups.first, self._mean[:, groups.level]
        )
        self._mean[:, groups.level] = mean
        return log_l

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Give the log e-value after each run."""
        groups = block.groups[self.along]
        by_level = self._log_bets_by_level(block, groups)
        log_l = np.empty_like(by_level)
        log_l[:, groups.by_level] = by_level
        path = grow_wealth(self._joint, log_l, log_start_weight(block.count))
        self._joint = path[:, -1].copy()
        every = log_e_of(path, log_unspent(block.count))
        one = self._advance_single(groups, by_level)
        return np.logaddexp(every + np.log1p(-SINGLE_LEVEL_MASS), one + np.log(SINGLE_LEVEL_MASS))

    def _advance_single(self, groups: Grouping, by_level: FloatArray) -> FloatArray:
        """Follow Σ_j w_j E_j plus what no level has claimed."""
        value = np.empty(groups.code.size)
        log_start, unspent = log_start_weight(groups.count + 1), log_unspent(groups.count + 1)
        for first, n_runs, level in zip(groups.first, groups.n_runs, groups.level, strict=True):
            part = slice(first, first + n_runs)
            path = grow_wealth(self._single[:, level], by_level[:, part], log_start[part])
            self._single[:, level] = path[:, -1]
            value[groups.by_level[part]] = log_e_of(path, unspent[part])
        self._count[groups.level] += groups.n_runs
        weighted = value + log_level_weight(groups.code)
        self._last = (groups.code, weighted, self._latest.copy())
        total = log_sum_of_latest(groups.code, weighted, self._latest)
        n_seen = np.maximum.accumulate(np.maximum(groups.code, self._n_seen_before() - 1)) + 1
        return np.logaddexp(total, -np.log1p(n_seen))

    def _n_seen_before(self) -> int:
        return int(np.isfinite(self._last[2]).sum())

    def level_log_e(self, at: int) -> FloatArray:
        """Give each level's own log e-value after run `at` of the block taken last."""
        code, weighted, before = self._last
        latest = before.copy()
        latest[code[: at + 1]] = weighted[: at + 1]
        return latest - log_level_weight(np.arange(latest.size))

    def state(self) -> State:
        """Give the state as named arrays."""
        return {
            "mean": self._mean,
            "count": self._count,
            "joint": self._joint,
            "single": self._single,
            "latest": self._latest,
        }

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._mean, self._count, self._joint = state["mean"], state["count"], state["joint"]
        self._single, self._latest = state["single"], state["latest"]
