"""The book of all bets of a response: from scores to the e-processes of its families."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import SINGLE_LEVEL_MASS
from auditd.sequential.levels_alone import LevelsAlone
from auditd.sequential.options import Options
from auditd.sequential.questions import bets_asked
from auditd.sequential.scored_block import ScoredBlock, State
from auditd.sequential.wealth import StartMixture

FloatArray = npt.NDArray[np.float64]
Key = tuple[str, str]

LOG_ONE = float(np.log(SINGLE_LEVEL_MASS))
LOG_EVERY = float(np.log1p(-SINGLE_LEVEL_MASS))


class Book:
    """Bets, their joint wealths, and the wealths of single levels.

    Attributes
    ----------
    keys : (kind, along) of each family.
    """

    def __init__(self, options: Options) -> None:
        self._bets = bets_asked(options)
        self.keys: tuple[Key, ...] = tuple(
            (kind, bet.along) for bet in self._bets for kind, _ in bet.families
        )
        self._joint = StartMixture([family for bet in self._bets for family in bet.families])
        self._alone = {bet.along: LevelsAlone(bet.families) for bet in self._bets if bet.has_levels_alone}
        self._shared: dict[str, FloatArray] = {}

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Take the next scored runs; give each family's log e-value after each, (families, n)."""
        log_l = [bet.log_bets(block) for bet in self._bets]
        log_e = self._joint.follow(np.concatenate(log_l), block.count)
        row = 0
        for bet, bets_log_l in zip(self._bets, log_l, strict=True):
            rows = slice(row, row + len(bet.families))
            row = rows.stop
            if bet.has_levels_alone:
                alone = self._alone[bet.along].follow(bets_log_l, block.count, block.groups[bet.along])
                self._shared[bet.along] = log_e[rows] - alone
                log_e[rows] = np.logaddexp(log_e[rows] + LOG_EVERY, alone + LOG_ONE)
        return log_e

    def shared(self, at: int) -> dict[Key, bool]:
        """Say, for families with levels alone, whether all levels together show more, after run `at`."""
        return {
            (kind, bet.along): bool(self._shared[bet.along][number, at] > 0.0)
            for bet in self._bets
            if bet.has_levels_alone
            for number, (kind, _) in enumerate(bet.families)
        }

    def level_log_wealth(self, key: Key, at: int) -> FloatArray | None:
        """Give each level's own log wealth after run `at` of the block taken last, or None."""
        for bet in self._bets:
            kinds = [kind for kind, _ in bet.families]
            if bet.has_levels_alone and bet.along == key[1] and key[0] in kinds:
                return self._alone[bet.along].level_log_wealth(kinds.index(key[0]), at)
        return None

    def state(self) -> dict[str, State]:
        """Give the state, by part."""
        parts = {f"bets {number}": bet.state() for number, bet in enumerate(self._bets)}
        parts["joint"] = {"log_wealth": self._joint.log_wealth}
        for name, alone in self._alone.items():
            parts[f"alone {name}"] = {"log_wealth": alone.log_wealth, "latest": alone.latest}
        return parts

    def restore(self, parts: dict[str, State]) -> None:
        """Take a state given by `state`."""
        for number, bet in enumerate(self._bets):
            bet.restore(parts[f"bets {number}"])
        self._joint.log_wealth = parts["joint"]["log_wealth"]
        for name, alone in self._alone.items():
            alone.log_wealth, alone.latest = (
                parts[f"alone {name}"]["log_wealth"],
                parts[f"alone {name}"]["latest"],
            )
