"""When the audit alarms, which kind leads, and what the leader explains."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
Key = tuple[str, str]

N_RUNS_SOON: Final = 300
"""Runs scored after a leader's alarm within which what it can explain is listed under it, at any date."""

TAKE_OVER_SHARE: Final = 0.5
"""A cycle takes a warning over if it shows so much of the leader's log e-value, over the same runs."""

MEAN_KINDS: Final = frozenset({"serial", "drift", "batch", "clock", "lineage"})
"""Kinds that say that a score's mean can be predicted; each leaves traces in all the others and in spread."""


LASTING_KINDS: Final = frozenset({"serial", "batch", "clock", "lineage"})
"""Kinds that go on for as long as nothing is repaired, and so explain later alarms too. A drift explains what
begins with it; a later alarm with another date is a fault of its own."""


@dataclass(frozen=True, kw_only=True)
class Explained:
    """A family that shows the leader's cause too."""

    kind: str
    along: str
    level: str | None
    log_e: float


@dataclass(frozen=True, kw_only=True)
class Alarm:
    """One family's alarm.

    Attributes
    ----------
    kind, along : the family; along is "order" or a nuisance's name.
    index : 0-based index of the run at which it alarmed.
    log_e : the family's log e-value there.
    lead : whether it leads its warning; otherwise the alarm of `under` explains it.
    level : the level named, for an alarm along a nuisance.
    since, since_low, since_high : most probable first run of the dependence, and the first and last of those
        that cannot be excluded (0-based indices).
    threshold : log of what was crossed: 1/budget by the mean of all, or K/budget by the family's own; by its
        own, 1/budget where it only takes a standing warning over.
    log_mean : log of the mean of the K e-processes at the run.
    n_scored : scored runs up to and with this one.
    explains : what stood beside the leader at that run and is explained by it.
    under : (kind, along) of the leader that explains this alarm.
    replaces : (kind, along) of the leader whose warning this alarm takes over.
    """

    kind: str
    along: str
    index: int
    log_e: float
    lead: bool
    level: str | None = None
    since: int = 0
    since_low: int = 0
    since_high: int = 0
    threshold: float = 0.0
    log_mean: float = 0.0
    n_scored: int = 0
    explains: tuple[Explained, ...] = ()
    under: Key | None = None
    replaces: Key | None = None

    @property
    def key(self) -> Key:
        """The family: (kind, along)."""
        return self.kind, self.along


@dataclass(frozen=True, kw_only=True)
class Crossing:
    """A family's crossing within a block: position, family, threshold.

    Attributes
    ----------
    first : it is the epoch's first alarm.
    renames : it raises nothing of its own, and is an alarm only if it takes a standing warning over.
    """

    at: int
    key: Key
    threshold: float
    first: bool = False
    renames: bool = False


def can_explain(leader: Key, other: Key) -> bool:
    """Say whether the leader's cause would also raise the other family."""
    if leader[0] == "spread":
        return other[0] == "spread"
    return other[0] in MEAN_KINDS or other[0] == "spread"


def can_take_over(newcomer: Key, leader: Key) -> bool:
    """Say whether the newcomer may be the better name of the leader's warning.

    `clock` bets only once three periods have passed and predicts by the time alone, while a leader that
    alarmed before only followed what the cycle does.
    """
    return newcomer[0] == "clock" and leader[0] in MEAN_KINDS - {"clock"}


def crossings(
    log_e: Mapping[Key, FloatArray],
    log_mean: FloatArray,
    *,
    before: Mapping[Key, float],
    threshold_first: float,
    threshold_own: float,
    raised: frozenset[Key],
    leader_at: Callable[[int], Key],
) -> list[Crossing]:
    """Find the alarms of a block, in order.

    Before any alarm the mean of all decides, and `leader_at` names the family; from there on each by its own.

    Parameters
    ----------
    log_e, log_mean : (n,) each.
    before : log e-values before the block.
    threshold_first, threshold_own : log 1/budget and log K/budget.
    raised : families that have alarmed already.
    leader_at : names the family that leads a first alarm at a position.
    """
    found: list[Crossing] = []
    begin = 0
    is_first = not raised
    if is_first:
        first = np.flatnonzero(log_mean >= threshold_first)
        if first.size == 0:
            return []
        begin = int(first[0])
        leader = leader_at(begin)
        found.append(Crossing(at=begin, key=leader, threshold=threshold_first, first=True))
        raised = frozenset({leader})
    for key, path in log_e.items():
        if key in raised:
            continue
        own = np.flatnonzero(path[begin:] >= threshold_own)
        if own.size:
            found.append(Crossing(at=begin + int(own[0]), key=key, threshold=threshold_own))
        if key[0] == "clock":
            earlier = -np.inf if is_first else before[key]
            found += [
                Crossing(at=begin + at, key=key, threshold=threshold_first, renames=True)
                for at in _upward(path[begin:], earlier, threshold_first)
            ]
    return sorted(found, key=lambda crossing: (crossing.at, not crossing.first, crossing.renames))


def _upward(path: FloatArray, before: float, threshold: float) -> list[int]:
    """Give the positions at which a path reaches a threshold from below."""
    above = path >= threshold
    return np.flatnonzero(above & ~np.append(before >= threshold, above[:-1])).tolist()
