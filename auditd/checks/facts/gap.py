"""Numbers of the sequence that are missing, or used twice."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import ClassVar

from auditd.checks.facts.condition import Condition, counted
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run

N_WAIT_NUMBERS = 100
"""With another order than the sequence: how far the numbers must go on before one counts as missing."""
N_LISTED = 3
"""Missing numbers that a message names."""


class GapFact(Quiet):
    """Find numbers that were passed over, and numbers used twice.

    Exact. Where runs are ordered by their numbers, a number is missing when a larger one has got its place
    without it. The numbering is taken to begin at the first number placed. A run that failed and was
    reported is there; one that never landed is a gap, and if results decide which runs never land, the
    means of those that do are not what they seem. Numbers that land late close their gap.
    """

    kind: ClassVar[Kind] = "gap"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        by_sequence = plan.order.by in {None, "sequence"}
        self._wait = 0 if by_sequence else N_WAIT_NUMBERS
        self._next: int | None = None  # every number below is there or missing
        self._ahead: set[int] = set()
        self._landed: set[int] = set()  # numbers without a place: they wait, or came late
        self._missing: dict[int, None] = {}  # in the order in which they were found missing
        self._gap: Condition | None = None
        self._twice: Condition | None = None
        self._twice_number = 0

    def arrived(self, run: Run, _arrival: int) -> Iterable[Finding]:
        """Close a gap with a number that lands late."""
        if run.sequence in self._missing and self._gap is not None:
            del self._missing[run.sequence]
            self._gap.unseen()
        elif run.sequence is not None:
            self._landed.add(run.sequence)
        return ()

    def placed(self, run: Run, _position: int) -> Iterable[Finding]:
        """Take the number of a run that has its place."""
        number = run.sequence
        if number is None:
            return ()
        self._landed.discard(number)
        if self._next is None:
            self._next = number
        if number == self._next and not self._ahead:
            self._next += 1
            return ()
        if number < self._next or number in self._ahead:
            return self._used_twice(run, number)
        self._ahead.add(number)
        return self._moved_on(run, max(self._ahead) if self._wait else number)

    def standing(self) -> Iterator[Finding]:
        """Tell of gaps that have closed."""
        if self._gap is not None and self._gap.changed:
            yield self._gap_finding(self._gap)

    def _moved_on(self, run: Run, largest: int) -> list[Finding]:
        found: list[Finding] = []
        at = self._next or 0
        while self._ahead:
            if at in self._ahead or at in self._landed:
                self._ahead.discard(at)
            elif largest - at > self._wait or not self._wait:
                found += self._is_missing(run, at)
            else:
                break
            at += 1
        self._next = at
        return found

    def _is_missing(self, run: Run, number: int) -> list[Finding]:
        self._missing[number] = None
        if self._gap is None:
            self._gap = Condition("gap:sequence", run.id)
        return [self._gap_finding(self._gap)] if self._gap.seen() else []

    def _used_twice(self, run: Run, number: int) -> list[Finding]:
        if number in self._missing or (self._wait and number < (self._next or 0)):
            return []
        if self._twice is None:
            self._twice = Condition("gap:twice", run.id)
            self._twice_number = number
        return [self._twice_finding(self._twice)] if self._twice.seen() else []

    def _gap_finding(self, condition: Condition) -> Finding:
        condition.changed = False
        n = condition.n
        listed = ", ".join(str(number) for number, _ in zip(self._missing, range(N_LISTED), strict=False))
        more = ", …" if n > N_LISTED else ""
        message = (
            f"{counted(n, 'number')} of the sequence never landed, first passed over at {condition.run}: "
            f"{listed}{more}"
        )
        if not n:
            message = "every number of the sequence has landed by now"
        return Finding(
            key="gap:sequence", kind="gap", message=message, run=condition.run, n=n, n_again=n, holds=n > 0
        )

    def _twice_finding(self, condition: Condition) -> Finding:
        n = condition.n
        message = (
            f"sequence number {self._twice_number} of {condition.run} had been used before; "
            f"{counted(n, 'number')} used twice, so that the order between such runs is not known"
        )
        return Finding(key="gap:twice", kind="gap", message=message, run=condition.run, n=n)
