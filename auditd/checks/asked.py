"""An answer put together from a check and what it computed."""

from __future__ import annotations

import math

from auditd.checks.answer import Answer
from auditd.checks.check import Check
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect


def answered(
    check: Check,
    view: View,
    *,
    statistic: float,
    pvalue: float,
    effect: Effect | None = None,
    n: int | None = None,
    reason: str | None = None,
) -> Answer:
    """Return the answer of a check to a view.

    Raises
    ------
    NotTestable
        The statistic or its p-value is no number: never given as an answer.
    """
    if not (math.isfinite(statistic) and math.isfinite(pvalue)):
        raise NotTestable("results from which the statistic is a number", f"{statistic}")
    return Answer(
        check=check.name,
        along=view.along,
        family=check.family,
        response=view.series.response,
        null=check.null,
        assumes=check.assumes,
        source=check.source,
        statistic=float(statistic),
        pvalue=min(max(float(pvalue), 0.0), 1.0),
        effect=_finite(effect),
        n=view.n if n is None else int(n),
        reason=reason,
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


def _finite(effect: Effect | None) -> Effect | None:
    """Return an effect in plain floats; None where it is no number, no interval where a bound is none."""
    if effect is None or not math.isfinite(effect.value):
        return None
    low, high = effect.low, effect.high
    if low is None or high is None or not (math.isfinite(low) and math.isfinite(high)):
        return Effect(name=effect.name, value=float(effect.value))
    return Effect(name=effect.name, value=float(effect.value), low=float(low), high=float(high))
