"""What bets see of a block: scores and labels, never values."""

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
    reliability : (n,) squared correlation of each score with the one that an endless reference would give;
        known from the reference's size alone.
    count : (n,) 1-based number of each run among the scored runs of the epoch.
    times : (n,) POSIX seconds, NaN where unknown.
    parent_z : (n,) score of the parent run, NaN where there is none.
    parent_reliability : (n,) reliability of that score, 0 where there is none.
    groups : grouping by each nuisance.
    """

    z: FloatArray
    reliability: FloatArray
    count: IntArray
    times: FloatArray
    parent_z: FloatArray
    parent_reliability: FloatArray
    groups: Mapping[str, Grouping]


class Bets(Protocol):
    """Predictive densities of the next scores, for the families of one order.

    Attributes
    ----------
    along : "order" or the nuisance's name.
    families : kinds bet on, each with its number of grid points, in the order of the rows of `log_bets`.
    has_levels_alone : whether half of the mass bets that one level alone is affected.
    """

    along: str
    families: tuple[tuple[str, int], ...]
    has_levels_alone: bool

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L = log f(z_t | past) − log φ(z_t), (grid, n), and take the scores into the past.

        Each L is a ratio of a predictive density to the null's: its conditional mean is 1 under the null.
        """
        ...

    def state(self) -> State:
        """Give the state as named arrays."""
        ...

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        ...
