"""`lineage`: a restarted run inherits from its parent."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import LINEAGE_PHI
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]


class ParentCorrelation:
    """Bets that a run's score is N(φ·z_parent, 1 − φ²); without a scored earlier parent it does not bet."""

    families: tuple[tuple[str, int], ...] = (("lineage", len(LINEAGE_PHI)),)
    has_levels_alone = False
    along = "order"

    def __init__(self) -> None:
        self._phi = np.array(LINEAGE_PHI)[:, None]

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every coefficient, (grid, n)."""
        known = np.isfinite(block.parent_z)
        phi = self._phi * np.sqrt(np.where(known, block.reliability * block.parent_reliability, 0.0))
        variance = 1.0 - phi**2
        residual = block.z - phi * np.where(known, block.parent_z, 0.0)
        log_l = 0.5 * block.z**2 - 0.5 * np.log(variance) - residual**2 / (2.0 * variance)
        return np.where(known, log_l, 0.0)

    def state(self) -> State:
        """Give the state as named arrays."""
        return {}

    def restore(self, state: State) -> None:
        """Take a state given by `state`: nothing, since these bets remember nothing."""
