"""`spread`: scores are wider or narrower than the reference."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import SPREAD_SCALE
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]


class SpreadChange:
    """Bets that scores are N(0, κ²)."""

    families: tuple[tuple[str, int], ...] = (("spread", len(SPREAD_SCALE)),)
    has_levels_alone = False
    along = "order"

    def __init__(self) -> None:
        self._scale = np.array(SPREAD_SCALE)[:, None]

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every scale, (grid, n)."""
        variance = 1.0 + block.reliability * (self._scale**2 - 1.0)
        log_l: FloatArray = 0.5 * block.z**2 * (1.0 - 1.0 / variance) - 0.5 * np.log(variance)
        return log_l

    def state(self) -> State:
        """Give the state as named arrays."""
        return {}

    def restore(self, state: State) -> None:
        """Take a state given by `state`: nothing, since these bets remember nothing."""
