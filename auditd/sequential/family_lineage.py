"""`lineage`: a restarted run inherits from its parent."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import FIRST_START_MASS, LINEAGE_PHI
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import grow_wealth, log_e_of

FloatArray = npt.NDArray[np.float64]


class ParentCorrelation:
    """Bets that a run's score is N(φ·z_parent, 1 − φ²); a run without a scored earlier parent is not bet on."""

    kind = "lineage"
    along = "order"

    def __init__(self) -> None:
        self._phi = np.array(LINEAGE_PHI)[:, None]
        self._log_wealth = np.full(len(LINEAGE_PHI), np.log(FIRST_START_MASS))

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every coefficient, (grid, n)."""
        known = np.isfinite(block.parent_z)
        variance = 1.0 - self._phi**2
        residual = block.z - self._phi * np.where(known, block.parent_z, 0.0)
        log_l = 0.5 * block.z**2 - 0.5 * np.log(variance) - residual**2 / (2.0 * variance)
        return np.where(known, log_l, 0.0)

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
