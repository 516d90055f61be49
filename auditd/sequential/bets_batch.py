"""`batch`: each level of a nuisance has an effect of its own."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import BATCH_SHARE, BATCH_WINDOW
from auditd.sequential.levels import Grouping, grown
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

    families: tuple[tuple[str, int], ...] = (("batch", len(BATCH_SHARE)),)
    has_levels_alone = False

    def __init__(self, along: str) -> None:
        self.along = along
        self._share = np.array(BATCH_SHARE)[:, None]
        self._precision = np.zeros((len(BATCH_SHARE), 0))
        self._moment = self._precision
        self._slow = np.zeros(2)

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n).

        A score of reliability ρ is √ρ·b plus a residual of variance 1 − ρ·s.
        """
        groups = block.groups[self.along]
        self._precision = grown(self._precision, groups.n_levels, 0.0)
        self._moment = grown(self._moment, groups.n_levels, 0.0)
        fed = block.z - self._slow_level(block.z)
        z, fed, rho = block.z[groups.by_level], fed[groups.by_level], block.reliability[groups.by_level]
        root = np.sqrt(rho)
        residual = 1.0 - rho * self._share
        precision, self._precision = _earlier_sums(rho / residual, groups, self._precision)
        moment, self._moment = _earlier_sums(root * fed / residual, groups, self._moment)
        posterior = 1.0 / (precision + 1.0 / self._share)
        variance = residual + rho * posterior
        by_level = (
            0.5 * z * z - 0.5 * np.log(variance) - (z - root * posterior * moment) ** 2 / (2.0 * variance)
        )
        log_l: FloatArray = np.empty_like(by_level)
        log_l[:, groups.by_level] = by_level
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
        return {"precision": self._precision, "moment": self._moment, "slow": self._slow}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._precision, self._moment = state["precision"], state["moment"]
        self._slow = state["slow"]


def _earlier_sums(terms: FloatArray, groups: Grouping, state: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Sum the earlier terms of each run's level, (grid, n) in the order of levels; give the new sums too."""
    total = np.cumsum(terms, axis=1)
    before = total[:, groups.first] - terms[:, groups.first]
    earlier = total - terms + np.repeat(state[:, groups.level] - before, groups.n_runs, axis=1)
    last = groups.first + groups.n_runs - 1
    sums = state.copy()
    sums[:, groups.level] = earlier[:, last] + terms[:, last]
    return earlier, sums
