"""Stated times that cannot be true."""

from __future__ import annotations

from bisect import bisect_left, bisect_right
from collections.abc import Hashable, Iterable
from datetime import datetime
from typing import ClassVar

from auditd.checks.facts.condition import Condition, counted
from auditd.checks.facts.labels import level_key
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Level, Run, level_label

WHOLE_SECONDS_S = 1.0
"""Overlap that rounding to whole seconds can make (s); times that state fractions are held to 1 ms."""
FRACTIONS_S = 0.001
N_INTERVALS_KEPT = 4096
"""Runs of one machine whose intervals are remembered; runs that land later than that are not compared."""


class _Machine:
    """The intervals that one machine was busy for, by start, and the run last placed there."""

    def __init__(self) -> None:
        self.starts: list[float] = []
        self.ends: list[float] = []
        self.longest_s = 0.0
        self.latest_s = 0.0
        self.last_placed: tuple[float, str] | None = None

    def n_beside(self, start: float, end: float, tolerance_s: float) -> int:
        """Return the largest number of remembered runs that were under way at one moment within "
        "[start, end].
        """
        if start >= self.latest_s - tolerance_s:
            return 0
        low = bisect_left(self.starts, start - self.longest_s)
        high = bisect_right(self.starts, end - tolerance_s)
        events: list[tuple[float, int]] = []
        for s, e in zip(self.starts[low:high], self.ends[low:high], strict=True):
            if min(e, end) - max(s, start) > tolerance_s:
                events += [(max(s, start) + tolerance_s / 2, 1), (min(e, end) - tolerance_s / 2, -1)]
        events.sort()
        at_once = most = 0
        for _, step in events:
            at_once += step
            most = max(most, at_once)
        return most

    def add(self, start: float, end: float) -> None:
        """Remember an interval, and forget the earliest when there are too many."""
        where = bisect_right(self.starts, start)
        self.starts.insert(where, start)
        self.ends.insert(where, end)
        self.longest_s = max(self.longest_s, end - start)
        self.latest_s = max(self.latest_s, end)
        if len(self.starts) > N_INTERVALS_KEPT:
            del self.starts[0], self.ends[0]


class TimeFact(Quiet):
    """Find runs that finish before they start, runs on one exclusive machine at once, and clocks that step.

    Exact. Overlap and clock steps are asked of the plan's `[machines] exclusive` only: more than `slots`
    runs at one moment, by more than the times' own rounding; with an order by sequence, a run that starts
    before the one of the next smaller number on its machine did. A start later than the arrival is not
    asked, since machines disagree; a clock put forward between runs looks like idle time and is not seen.
    """

    kind: ClassVar[Kind] = "time"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._exclusive = tuple(plan.machines.exclusive)
        self._slots = plan.machines.slots
        self._by_sequence = _by_sequence(plan) and self._slots == 1
        self._machines: dict[tuple[str, Hashable], tuple[_Machine, str]] = {}
        self._conditions: dict[str, tuple[Condition, str, str | None, str | None]] = {}

    def arrived(self, run: Run, _arrival: int) -> list[Finding]:
        """Compare the run's own times, and its interval with those of its machine."""
        start, finish = run.started, run.finished
        if start is None or finish is None:
            return []
        if finish < start:
            along = self._exclusive[0] if self._exclusive else None
            level = level_label(run.nuisance.get(along)) if along else None
            first = f"{run.id} finished {(start - finish).total_seconds():.3g} s before it started"
            return self._seen(f"time:backward:{level}", run, first, along, level)
        return self._overlaps(run, start, finish) if self._exclusive else []

    def placed(self, run: Run, _position: int) -> Iterable[Finding]:
        """Compare the run's start with that of the run before it on its machine."""
        if not self._by_sequence or run.started is None:
            return ()
        found: list[Finding] = []
        at_s = run.started.timestamp()
        for along in self._exclusive:
            machine, level = self._machine(along, run.nuisance.get(along))
            before, machine.last_placed = machine.last_placed, (at_s, run.id)
            if before is not None and at_s < before[0] - _tolerance_s(run.started, run.started):
                first = (
                    f"{run.id} started {before[0] - at_s:.3g} s before {before[1]}, which has a smaller "
                    "number"
                )
                found += self._seen(f"time:clock:{along}={level}", run, first, along, level)
        return found

    def _overlaps(self, run: Run, start: datetime, finish: datetime) -> list[Finding]:
        found: list[Finding] = []
        tolerance_s = _tolerance_s(start, finish)
        low, high = start.timestamp(), finish.timestamp()
        for along in self._exclusive:
            machine, level = self._machine(along, run.nuisance.get(along))
            n_beside = machine.n_beside(low, high, tolerance_s)
            machine.add(low, high)
            if n_beside >= self._slots:
                first = (
                    f"{run.id} ran on {along} {level} beside {counted(n_beside, 'other run')}, with room "
                    f"for {self._slots}"
                )
                found += self._seen(f"time:overlap:{along}={level}", run, first, along, level)
        return found

    def _machine(self, along: str, level: Level) -> tuple[_Machine, str]:
        key = (along, level_key(level))
        known = self._machines.get(key)
        if known is None:
            known = self._machines[key] = (_Machine(), level_label(level))
        return known

    def _seen(self, key: str, run: Run, first: str, along: str | None, level: str | None) -> list[Finding]:
        entry = self._conditions.get(key)
        if entry is None:
            entry = self._conditions[key] = (Condition(key, run.id), first, along, level)
        return [_finding(*entry)] if entry[0].seen() else []


def _finding(condition: Condition, first: str, along: str | None, level: str | None) -> Finding:
    more = f"; {counted(condition.n, 'such run')} so far" if condition.n > 1 else ""
    return Finding(
        key=condition.key,
        kind="time",
        message=first + more,
        along=along,
        level=level,
        run=condition.run,
        n=condition.n,
    )


def _tolerance_s(start: datetime, finish: datetime) -> float:
    return FRACTIONS_S if start.microsecond or finish.microsecond else WHOLE_SECONDS_S


def _by_sequence(plan: Plan) -> bool:
    """Whether the audit's order is that of the stated numbers."""
    return plan.order.by == "sequence" or (plan.order.by is None and plan.record.sequence is not None)
