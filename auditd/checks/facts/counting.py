"""The facts that count and need probability: how many there are, and when one of them alarms."""

from __future__ import annotations

import math

from auditd.plan import Plan


def n_counting(plan: Plan) -> int:
    """Return how many e-processes the counting facts hold: fixed by the plan before the first run.

    One for the order of each factor's levels; and, for failures, one for the cells, one for each nuisance
    and one for the order of runs, where a status is stated.
    """
    n_failure = 2 + len(plan.nuisance) if plan.record.status is not None else 0
    return len(plan.factors) + n_failure


def threshold_log_e(plan: Plan, alarm_budget: float) -> float:
    """Return the log e-value from which a counting fact alarms.

    Each of K e-processes has, under its null, expectation at most 1 at any stopping time; by Ville's
    inequality the probability that it ever reaches K / budget is at most budget / K, and by the union over
    the K of them the probability of any such alarm is at most `alarm_budget`, however they depend on each
    other.

    References
    ----------
    Ville (1939), Étude critique de la notion de collectif, ch. V.
    """
    return math.log(max(1, n_counting(plan)) / alarm_budget)
