"""`batch`: each level of a nuisance has an effect of its own."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import BATCH_SHARE, BATCH_WINDOW, FIRST_START_MASS
from auditd.sequential.levels import Grouping, grown
from auditd.sequential.recurrence import solve_recurrence
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import grow_wealth, log_e_of

FloatArray = npt.NDArray[np.float64]


class BatchEffects:
    """Bets that levels have effects b ~ N(0, s), the residual's variance being 1 − s.

    A level's posterior is fed with scores minus a slow overall level (an exponential mean of memory
    BATCH_WINDOW), so that a drift common to all levels is not taken for a batch effect.

    References
    ----------
    Searle, Casella & McCulloch (1992), Variance Components, section 3.4: best prediction of a random effect.
    """

    kind = "batch"

    def __init__(self, along: str) -> None:
        self.along = along
        self._share = np.array(BATCH_SHARE)[:, None]
        self._sum = np.zeros(0)
        self._count = np.zeros(0)
        self._slow = np.zeros(2)
        self._log_wealth = np.full(len(BATCH_SHARE), np.log(FIRST_START_MASS))
        self._last: tuple[Grouping, FloatArray, FloatArray, FloatArray] | None = None

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n)."""
        groups = block.groups[self.along]
        n_levels = int(groups.level.max()) + 1
        self._sum, self._count = grown(self._sum, n_levels, 0.0), grown(self._count, n_levels, 0.0)
        fed = (block.z - self._slow_level(block.z))[groups.by_level]
        total = np.cumsum(fed)
        before_segment = np.repeat(total[groups.first] - fed[groups.first], groups.n_runs)
        earlier = np.repeat(self._sum[groups.level], groups.n_runs) + (total - fed - before_segment)
        self._last = (groups, earlier + fed, self._sum.copy(), self._count.copy())
        log_l = np.empty((self._share.size, block.z.size))
        log_l[:, groups.by_level] = self._log_l(
            block.z[groups.by_level], earlier, groups.count.astype(np.float64)
        )
        ends = groups.first + groups.n_runs - 1
        self._sum[groups.level] = (earlier + fed)[ends]
        self._count[groups.level] += groups.n_runs
        return log_l

    def _log_l(self, z: FloatArray, earlier: FloatArray, count: FloatArray) -> FloatArray:
        s = self._share
        denominator = (1.0 - s) + count * s
        mean = s * earlier / denominator
        variance = (1.0 - s) * (1.0 + s / denominator)
        log_l: FloatArray = 0.5 * z * z - 0.5 * np.log(variance) - (z - mean) ** 2 / (2.0 * variance)
        return log_l

    def _slow_level(self, z: FloatArray) -> FloatArray:
        """Follow the exponential mean of scores; state: sums of weighted scores and of weights."""
        keep = 1.0 - 1.0 / BATCH_WINDOW
        coefficient = np.full((2, z.size), keep)
        term = np.vstack((z, np.ones(z.size)))
        coefficient[:, 0] = 0.0
        term[:, 0] += keep * self._slow
        sums = solve_recurrence(coefficient, term)
        self._slow = sums[:, -1].copy()
        level: FloatArray = sums[0] / sums[1]
        return level

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Give the log e-value after each run."""
        path = grow_wealth(self._log_wealth, self.log_bets(block), log_start_weight(block.count))
        self._log_wealth = path[:, -1].copy()
        return log_e_of(path, log_unspent(block.count))

    def level_log_e(self, at: int) -> FloatArray:
        """Give, for each level, half the square of its standardised sum after run `at` of the block taken last."""
        if self._last is None:
            return np.zeros(0)
        groups, sums, before_sum, before_count = self._last
        sums_in_order = np.empty_like(sums)
        sums_in_order[groups.by_level] = sums
        counts_in_order = np.empty_like(sums)
        counts_in_order[groups.by_level] = groups.count + 1.0
        total, count = before_sum.copy(), before_count.copy()
        total[groups.code[: at + 1]] = sums_in_order[: at + 1]
        count[groups.code[: at + 1]] = counts_in_order[: at + 1]
        half_square: FloatArray = 0.5 * total**2 / np.maximum(count, 1.0)
        return half_square

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"sum": self._sum, "count": self._count, "slow": self._slow, "log_wealth": self._log_wealth}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._sum, self._count = state["sum"], state["count"]
        self._slow, self._log_wealth = state["slow"], state["log_wealth"]
