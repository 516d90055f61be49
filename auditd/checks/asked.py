"""An answer put together from a check and what it computed."""

from __future__ import annotations

from auditd.checks.answer import Answer
from auditd.checks.check import Check
from auditd.checks.view import View
from auditd.records import Effect


def answered(
    check: Check, view: View, *, statistic: float, pvalue: float, effect: Effect | None = None
) -> Answer:
    """Return the answer of a check to a view."""
    return Answer(
        check=check.name,
        along=view.along,
        family=check.family,
        response=view.series.response,
        null=check.null,
        assumes=check.assumes,
        source=check.source,
        statistic=float(statistic),
        pvalue=float(pvalue),
        effect=effect,
        n=view.n,
    )


def not_testable(check: Check, view: View, reason: str) -> Answer:
    """Return the finding that a check cannot be asked of a view, and why."""
    return Answer(
        check=check.name,
        along=view.along,
        family=check.family,
        response=view.series.response,
        null=check.null,
        assumes=check.assumes,
        source=check.source,
        n=view.n,
        verdict="not testable",
        reason=reason,
    )
