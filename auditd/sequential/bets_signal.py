"""`serial` and `drift`: scores follow a latent AR(1) signal, quick or slow."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import DRIFT_PHI_LEVEL, DRIFT_PHI_ORDER, DRIFT_SHARE, SERIAL_PHI, SERIAL_SHARE
from auditd.sequential.latent_ar1 import Grid, SignalState, gain_table, log_bets
from auditd.sequential.levels import grown
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]

ALONG_ORDER: dict[str, Grid] = {"serial": (SERIAL_PHI, SERIAL_SHARE), "drift": (DRIFT_PHI_ORDER, DRIFT_SHARE)}
WITHIN_LEVELS: dict[str, Grid] = {
    "serial": (SERIAL_PHI, SERIAL_SHARE),
    "drift": (DRIFT_PHI_LEVEL, DRIFT_SHARE),
}


class SignalAlongOrder:
    """Bets that scores follow one signal along the order.

    Null hypothesis: scores are independent standard normal (exchangeable runs). Alternative: a run's score is
    predicted by those of the runs before it.
    """

    along = "order"
    has_levels_alone = False

    def __init__(self, kinds: tuple[str, ...], grids: dict[str, Grid] | None = None) -> None:
        chosen = grids or ALONG_ORDER
        self._table = gain_table(tuple(chosen[kind] for kind in kinds))
        self.families = tuple((kind, len(chosen[kind][0]) * len(chosen[kind][1])) for kind in kinds)
        n_grid = self._table.carry.shape[0]
        self._signal = SignalState(mean=np.zeros((n_grid, 1)), trust=np.ones((n_grid, 1)))
        self._first = np.zeros(1, dtype=np.int64)

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n)."""
        log_l, self._signal = log_bets(
            self._table, block.z, block.reliability, block.count - 1, self._first, self._signal
        )
        return log_l

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"mean": self._signal.mean, "trust": self._signal.trust}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._signal = SignalState(mean=state["mean"], trust=state["trust"])


class SignalWithinLevels:
    """Bets that within each level of a nuisance scores follow a signal of that level's own."""

    has_levels_alone = True

    def __init__(self, along: str, kinds: tuple[str, ...]) -> None:
        self.along = along
        self._table = gain_table(tuple(WITHIN_LEVELS[kind] for kind in kinds))
        self.families = tuple(
            (kind, len(WITHIN_LEVELS[kind][0]) * len(WITHIN_LEVELS[kind][1])) for kind in kinds
        )
        self._mean = np.zeros((self._table.carry.shape[0], 0))
        self._trust = self._mean

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point in the order of the runs, (grid, n)."""
        groups = block.groups[self.along]
        self._mean = grown(self._mean, groups.n_levels, 0.0)
        self._trust = grown(self._trust, groups.n_levels, 1.0)
        by_level, signal = log_bets(
            self._table,
            block.z[groups.by_level],
            block.reliability[groups.by_level],
            groups.count,
            groups.first,
            SignalState(mean=self._mean[:, groups.level], trust=self._trust[:, groups.level]),
        )
        self._mean[:, groups.level], self._trust[:, groups.level] = signal.mean, signal.trust
        log_l = np.empty_like(by_level)
        log_l[:, groups.by_level] = by_level
        return log_l

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"mean": self._mean, "trust": self._trust}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._mean, self._trust = state["mean"], state["trust"]
