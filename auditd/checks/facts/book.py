"""All facts of one plan, told together: the one object that the pipeline holds."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from auditd.checks.facts.protocol import Fact, Quiet
from auditd.checks.facts.registry import FACTS
from auditd.plan import Plan
from auditd.records import Finding, Refusal, Run


class FactBook:
    """The plan's facts.

    Parameters
    ----------
    plan : what is audited.
    alarm_budget : the share of the campaign's alarm budget that all counting facts have together.
    """

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        self.facts: tuple[Fact, ...] = tuple(make(plan, alarm_budget=alarm_budget) for make in FACTS)
        self._arrived = tuple(fact.arrived for fact in self.facts if _asks(fact, "arrived"))
        self._placed = tuple(fact.placed for fact in self.facts if _asks(fact, "placed"))

    def arrived(self, run: Run, arrival: int) -> list[Finding]:
        """Tell every fact of a run that has landed, late or not; in arrival order."""
        return _gathered(self._arrived, run, arrival)

    def placed(self, run: Run, position: int) -> list[Finding]:
        """Tell every fact of a run that has got its place; in the order of places."""
        return _gathered(self._placed, run, position)

    def refused(self, refusal: Refusal) -> list[Finding]:
        """Tell every fact of a refusal, in arrival order among the runs."""
        return [finding for fact in self.facts for finding in fact.refused(refusal)]

    def standing(self) -> list[Finding]:
        """Return what has grown or ended since it was last told; call it after each block."""
        return [finding for fact in self.facts for finding in fact.standing()]


def _gathered(calls: tuple[Callable[[Run, int], Iterable[Finding]], ...], run: Run, n: int) -> list[Finding]:
    found: list[Finding] = []
    for call in calls:
        answer = call(run, n)
        if answer:
            found.extend(answer)
    return found


def _asks(fact: Fact, call: str) -> bool:
    """Whether a fact does anything at a call: those that do not are not called a million times."""
    return getattr(type(fact), call) is not getattr(Quiet, call)
