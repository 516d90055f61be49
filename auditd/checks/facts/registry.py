"""The facts that are asked, in the order in which they answer."""

from __future__ import annotations

from typing import Protocol

from auditd.checks.facts.protocol import Fact
from auditd.plan import Plan


class FactMaker(Protocol):
    """What makes a fact: its class, called with the plan and the counting facts' share of the budget."""

    def __call__(self, plan: Plan, *, alarm_budget: float) -> Fact:
        """Return a fact that has seen nothing yet."""
        ...


FACTS: tuple[FactMaker, ...] = ()
