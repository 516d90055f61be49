"""Whether the audited order can be trusted: how many runs came late, whether landing goes by outcome."""

from __future__ import annotations

import math

import numpy as np

from auditd.checks.facts.order import landing_order_finding, late_finding
from auditd.checks.view import normal_scores
from auditd.plan import Plan
from auditd.records import Finding
from auditd.series.load import order_of
from auditd.series.table import RunTable

LATE_SHARE = 0.005
"""Share of late runs above which the order warns: 1.6 % made a third of honest campaigns alarm in a trial."""
N_RUNS_MIN = 200
"""Runs before which neither is asked."""
P_LANDING = 1e-6
"""Level of the question whether a response goes with duration; small, since it is asked again and again."""


def order_findings(table: RunTable, plan: Plan) -> list[Finding]:
    """Return what speaks against the order by now."""
    if table.n < N_RUNS_MIN:
        return []
    found = []
    late = np.flatnonzero(table.late)
    if len(late) > LATE_SHARE * table.n:
        last = late[np.argmax(table.arrivals[late])]
        found.append(late_finding(n_late=len(late), n=table.n, run=str(table.ids[last])))
    if order_of(plan) == "arrival":
        found += [
            one for name in plan.responses if (one := _goes_with_duration(table, plan, name)) is not None
        ]
    return found


def _goes_with_duration(table: RunTable, plan: Plan, response: str) -> Finding | None:
    """Compare a response with the durations of its runs, by normal scores within cells."""
    from scipy.special import ndtr

    series = table.series(plan, response)
    duration = series.finished - series.started
    if (
        len(duration) < N_RUNS_MIN
        or np.isnan(duration).any()
        or not _overlap(series.started, series.finished)
    ):
        return None
    a = normal_scores(series.values, series.cells.codes)
    b = normal_scores(duration, series.cells.codes)
    if not a.any() or not b.any():
        return None
    r = float(np.corrcoef(a, b)[0, 1])
    pvalue = 2 * float(ndtr(-abs(r) * math.sqrt(len(a) - 1)))
    if pvalue > P_LANDING:
        return None
    return landing_order_finding(response=response, pvalue=pvalue, correlation=r, n=len(a))


def _overlap(started: np.ndarray, finished: np.ndarray) -> bool:
    """Whether runs overlapped, so that a short one could land before an earlier long one."""
    order = np.argsort(started)
    return bool((started[order][1:] < finished[order][:-1]).any())
