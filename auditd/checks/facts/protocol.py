"""What every fact is: told of each run once, and answering with findings."""

from __future__ import annotations

from collections.abc import Iterable
from typing import ClassVar, Protocol

from auditd.plan import Plan
from auditd.records import Finding, Kind, Refusal, Run


class Fact(Protocol):
    """One exact question, asked of each run as it lands.

    Its state lives in memory and is a function of the calls alone, so that replaying the store rebuilds
    it. `arrived` and `placed` tell of a condition at the run at which it begins, and again at runs at which
    it has grown by a tenth; `standing` tells of those that no longer hold (`holds=False`) or have shrunk.
    Nothing that is told depends on the split into blocks. Two findings of one key are one condition, the
    later one replaces the earlier.
    """

    kind: ClassVar[Kind]

    def arrived(self, run: Run, arrival: int, /) -> Iterable[Finding]:
        """Take a run as it lands, in arrival order, late runs too."""
        ...

    def placed(self, run: Run, position: int, /) -> Iterable[Finding]:
        """Take a run when it has got its place in the audit's order; late runs never come here."""
        ...

    def refused(self, refusal: Refusal, /) -> Iterable[Finding]:
        """Take a record that was not taken."""
        ...

    def standing(self) -> Iterable[Finding]:
        """Return what has changed since it was last told; asked after each block."""
        ...


class Quiet:
    """A base for facts that need some of the calls only: each of them does nothing and finds nothing."""

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        self.plan = plan
        self.alarm_budget = alarm_budget

    def arrived(self, _run: Run, _arrival: int, /) -> Iterable[Finding]:
        """Find nothing at landing."""
        return ()

    def placed(self, _run: Run, _position: int, /) -> Iterable[Finding]:
        """Find nothing when a run is placed."""
        return ()

    def refused(self, _refusal: Refusal, /) -> Iterable[Finding]:
        """Find nothing in a refusal."""
        return ()

    def standing(self) -> Iterable[Finding]:
        """Report nothing."""
        return ()
