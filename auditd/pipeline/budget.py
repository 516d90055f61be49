"""How the alarm budget is shared: between responses, counting facts, and the epochs of a campaign."""

from __future__ import annotations

import math

import msgspec

from auditd.plan import AUTO_RESPONSES, Plan
from auditd.series.load import response_names

AUTO_SHARE = 0.1
"""`duration` and `completed` together get a tenth of the budget."""
FACT_SHARE = 0.1
"""The facts that count (failures, order of levels) together get a tenth of the budget."""


class Shares(msgspec.Struct, frozen=True, kw_only=True):
    """Parts of the campaign's alarm budget; they add up to it."""

    responses: float
    added: float
    facts: float


def shares(plan: Plan) -> Shares:
    """Return the parts of the budget over the whole campaign."""
    budget = plan.campaign.alarm_budget
    has_added = any(name in AUTO_RESPONSES for name in response_names(plan))
    added = AUTO_SHARE if has_added else 0.0
    return Shares(
        responses=budget * (1 - added - FACT_SHARE), added=budget * added, facts=budget * FACT_SHARE
    )


def epoch_budget(share: float, epoch: int) -> float:
    """Return what epoch `epoch`, counted from 1, may spend: the parts of all epochs add up to the share."""
    return share * 6 / (math.pi**2 * epoch**2)
