"""Whether the audited order can be trusted: late runs counted, landing that goes by outcome found."""

import numpy as np
import pytest
from run_tables import START_S, table_of

from auditd.pipeline.order_watch import LATE_SHARE, N_RUNS_MIN, order_findings
from auditd.plan_reading import parse_plan

BY_ARRIVAL = parse_plan('[responses.y]\nat = "y"\n[order]\nby = "arrival"\n')
BY_START = parse_plan('[record]\nstarted = "s"\n[responses.y]\nat = "y"\n')


def landed(n=300, slope=1.0, *, overlapping=True, seed=1):
    rng = np.random.default_rng(seed)
    duration = rng.lognormal(6, 0.7, n)
    started = START_S + np.cumsum(np.full(n, 60.0 if overlapping else 1e5))
    return table_of(
        {"y": slope * np.log(duration) + rng.normal(size=n)}, started=started, finished=started + duration
    )


def test_a_response_that_goes_with_duration_is_told_under_arrival_only():
    """Short runs land first: by start that does no harm."""
    (one,) = order_findings(landed(), BY_ARRIVAL)
    assert (one.kind, one.response) == ("order", "y")
    assert "depends on the outcome" in one.message
    assert order_findings(landed(), BY_START) == []


@pytest.mark.parametrize(
    "table",
    [
        landed(slope=0.0),
        landed(overlapping=False),
        landed(n=N_RUNS_MIN - 1),
        table_of({"y": np.ones(300)}),
        table_of({"y": np.arange(300.0)}, finished=np.full(300, np.nan)),
    ],
    ids=["unrelated", "one after the other", "too few", "constant", "no durations"],
)
def test_near_misses_stay_silent(table):
    """No relation, no overlap, too few runs, nothing that varies or no durations: nothing is said."""
    assert order_findings(table, BY_ARRIVAL) == []


def test_unrelated_responses_do_not_alarm_by_chance():
    """At the level of 1e-6, 300 campaigns without any relation stay silent."""
    assert not any(order_findings(landed(slope=0.0, seed=k), BY_ARRIVAL) for k in range(300))


@pytest.mark.parametrize(("n_late", "told"), [(0, 0), (2, 0), (3, 1)])
def test_late_runs_are_told_above_half_a_per_cent(n_late, told):
    """2 of 400 runs are half a per cent, 3 more (design, section 7)."""
    late = np.zeros(400, dtype=bool)
    late[:n_late] = True
    found = order_findings(table_of({"y": np.arange(400.0)}, late=late), BY_START)
    assert len(found) == told
    assert (n_late > LATE_SHARE * 400) == bool(told)
    if found:
        assert found[0].key == "order:late"
