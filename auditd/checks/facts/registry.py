"""The facts that are asked, in the order in which they answer."""

from __future__ import annotations

from typing import Protocol

from auditd.checks.facts.cap import CapFact
from auditd.checks.facts.confound import ConfoundFact
from auditd.checks.facts.failure import FailureFact
from auditd.checks.facts.gap import GapFact
from auditd.checks.facts.lineage import LineageFact
from auditd.checks.facts.order import OrderFact
from auditd.checks.facts.protocol import Fact
from auditd.checks.facts.repeat import RepeatFact
from auditd.checks.facts.rewrite import RewriteFact
from auditd.checks.facts.seed import SeedFact
from auditd.checks.facts.time import TimeFact
from auditd.plan import Plan


class FactMaker(Protocol):
    """What makes a fact: its class, called with the plan and the counting facts' share of the budget."""

    def __call__(self, plan: Plan, *, alarm_budget: float) -> Fact:
        """Return a fact that has seen nothing yet."""
        ...


FACTS: tuple[FactMaker, ...] = (
    SeedFact,
    RepeatFact,
    LineageFact,
    ConfoundFact,
    OrderFact,
    FailureFact,
    TimeFact,
    GapFact,
    RewriteFact,
    CapFact,
)
