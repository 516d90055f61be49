"""What a family sees of a block: scores and labels, never values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

from auditd.sequential.levels import Grouping

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
State = dict[str, FloatArray]


@dataclass(frozen=True, kw_only=True)
class ScoredBlock:
    """Consecutive scored runs.

    Attributes
    ----------
    z : (n,) scores.
    count : (n,) 1-based number of each run among the scored runs of the epoch.
    times : (n,) POSIX seconds, NaN where unknown.
    parent_z : (n,) score of the parent run, NaN where there is none.
    groups : grouping by each nuisance.
    """

    z: FloatArray
    count: IntArray
    times: FloatArray
    parent_z: FloatArray
    groups: Mapping[str, Grouping]


class Family(Protocol):
    """An e-process on one kind of dependence along one order."""

    kind: str
    along: str

    def advance(self, block: ScoredBlock) -> FloatArray:
        """Take the next scored runs; give the family's log e-value after each."""
        ...

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point for the next runs, (grid, n), and take them into the posterior."""
        ...

    def state(self) -> State:
        """Give the state as named arrays."""
        ...

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        ...


class LevelFamily(Family, Protocol):
    """A family along a nuisance that can say which level stands out."""

    def level_log_e(self, at: int) -> FloatArray:
        """Give each level's own log e-value after run `at` of the block taken last."""
        ...
