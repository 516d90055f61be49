"""`serial` and `drift` along the whole order: a latent AR(1) signal, quick or slow."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS
from auditd.sequential.latent_ar1 import GainTable, log_bets
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import grow_wealth, log_e_of

FloatArray = npt.NDArray[np.float64]


class SignalAlongOrder:
    """Bets that scores follow a latent AR(1) signal along the order.

    Null hypothesis: scores are independent standard normal (exchangeable runs). Alternative: mean of a run's
    score is predicted by the runs before it.
    """

    along = "order"

    def __init__(self, kind: str, table: GainTable) -> None:
        self.kind = kind
        self._table = table
        n_grid = table.carry.shape[0]
        self._mean = np.zeros((n_grid, 1))
        self._log_wealth = np.full(n_grid, np.log(FIRST_START_MASS))

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n)."""
        log_l, self._mean = log_bets(
            self._table, block.z, block.count - 1, np.zeros(1, dtype=np.int64), self._mean
        )
        return log_l

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Give the log e-value after each run."""
        path = grow_wealth(self._log_wealth, self.log_bets(block), log_start_weight(block.count))
        self._log_wealth = path[:, -1].copy()
        return log_e_of(path, log_unspent(block.count))

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"mean": self._mean, "log_wealth": self._log_wealth}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._mean, self._log_wealth = state["mean"], state["log_wealth"]
