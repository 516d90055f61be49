"""`spread`: scores are wider or narrower than the reference."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS, SPREAD_SCALE
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import grow_wealth, log_e_of

FloatArray = npt.NDArray[np.float64]


class SpreadChange:
    """Bets that scores are N(0, κ²)."""

    kind = "spread"
    along = "order"

    def __init__(self) -> None:
        self._scale = np.array(SPREAD_SCALE)[:, None]
        self._log_wealth = np.full(len(SPREAD_SCALE), np.log(FIRST_START_MASS))

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every scale, (grid, n)."""
        log_l: FloatArray = 0.5 * block.z**2 * (1.0 - self._scale**-2.0) - np.log(self._scale)
        return log_l

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Give the log e-value after each run."""
        path = grow_wealth(self._log_wealth, self.log_bets(block), log_start_weight(block.count))
        self._log_wealth = path[:, -1].copy()
        return log_e_of(path, log_unspent(block.count))

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"log_wealth": self._log_wealth}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._log_wealth = state["log_wealth"]
