"""`batch`: each level of a nuisance has an effect of its own."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import BATCH_SHARE, BATCH_WINDOW
from auditd.sequential.levels import grown
from auditd.sequential.recurrence import solve_recurrence
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]


class BatchEffects:
    """Bets that levels have effects b ~ N(0, s), the residual's variance being 1 − s.

    A level's posterior is fed with scores minus a slow overall level (an exponential mean of memory
    BATCH_WINDOW), so that a drift common to all levels is not taken for a batch effect.

    References
    ----------
    Searle, Casella & McCulloch (1992), Variance Components, section 3.4: best prediction of a random effect.
    """

    families = (("batch", len(BATCH_SHARE)),)
    has_levels_alone = False

    def __init__(self, along: str) -> None:
        self.along = along
        self._share = np.array(BATCH_SHARE)[:, None]
        self._sum = np.zeros(0)
        self._slow = np.zeros(2)

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n)."""
        groups = block.groups[self.along]
        self._sum = grown(self._sum, groups.n_levels, 0.0)
        fed = (block.z - self._slow_level(block.z))[groups.by_level]
        total = np.cumsum(fed)
        before_segment = np.repeat(total[groups.first] - fed[groups.first], groups.n_runs)
        earlier = np.repeat(self._sum[groups.level], groups.n_runs) + (total - fed - before_segment)
        log_l = np.empty((self._share.size, block.z.size))
        log_l[:, groups.by_level] = self._log_l(
            block.z[groups.by_level], earlier, groups.count.astype(np.float64)
        )
        ends = groups.first + groups.n_runs - 1
        self._sum[groups.level] = (earlier + fed)[ends]
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

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"sum": self._sum, "slow": self._slow}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._sum, self._slow = state["sum"], state["slow"]
