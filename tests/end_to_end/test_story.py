"""Ten days in fast time: three faults, two repairs, one absorbed host, one amendment, told as planted."""

from datetime import UTC, datetime, timedelta

import numpy as np
import pytest
from campaigns_made import PLAN, append, lay_out

pytestmark = [pytest.mark.slow, pytest.mark.timeout(280)]

N_RUNS = 2180
STEP, REPAIRED, STAYS, ABSORBED, NOISY, QUIET = 300, 420, 800, 960, 1300, 1440


def story():
    """Return the runs: h2 steps from 300 to 420, h3 from 800 on, the scatter doubles from 1300 to 1440."""
    rng = np.random.default_rng(20270301)
    began = datetime(2027, 3, 1, tzinfo=UTC)
    found = []
    for k in range(N_RUNS):
        on = f"h{k % 4 + 1}" if rng.random() < 0.5 else f"h{rng.integers(1, 5)}"
        scatter = 2.2 if NOISY <= k < QUIET else 1.0
        shift = 2.0 * (on == "h2" and STEP <= k < REPAIRED) + 1.6 * (on == "h3" and k >= STAYS)
        started = began + timedelta(minutes=6.6 * k)
        found.append(
            {
                "id": f"r{k:05d}",
                "time": {"start": started.isoformat(), "end": (started + timedelta(minutes=4)).isoformat()},
                "seed": str(rng.integers(0, 2**62)),
                "status": "ok",
                "out": {"energy": scatter * rng.normal() + shift, "steps": float(rng.lognormal())},
                "cfg": {"scheme": str(rng.choice(["direct", "staged"]))},
                "env": {"host": on},
            }
        )
    return found


@pytest.fixture(scope="module")
def told(tmp_path_factory):
    """The campaign gathered piece by piece, answered and amended where the story says; its plan's path."""
    import os

    from auditd.pipeline.gathering import gather
    from auditd.pipeline.replying import amend, reply

    folder = tmp_path_factory.mktemp("story")
    plan = lay_out(folder, PLAN)
    runs = story()
    os.environ["RUNAUDIT_KEY"] = "5702"
    try:
        for start in range(0, N_RUNS, 60):
            append(folder, runs[start : start + 60])
            gather(plan, lambda _step, _totals: None)
            if start + 60 == REPAIRED:
                reply(plan, newest(plan, "energy"), "the fan of h2 was replaced", "restart", {"host": "h2"})
            if start + 60 == ABSORBED:
                reply(plan, newest(plan, "energy"), "h3 is slower for good", "absorb", {})
            if start + 60 == QUIET:
                reply(plan, newest(plan, "energy"), "the noisy neighbour was moved", "restart", {})
            if start + 60 == 1740:
                plan.write_text(PLAN.replace("margin = 0.2", "margin = 0.3"))
                amend(plan, "the margin of the review board")
    finally:
        del os.environ["RUNAUDIT_KEY"]
    return plan


def warnings(plan):
    from auditd.pipeline.asking import warnings_document
    from auditd.pipeline.campaign import open_for_queries

    return warnings_document(open_for_queries(plan))["warnings"]


def newest(plan, response):
    """The newest standing warning of a response."""
    return [
        one["id"] for one in warnings(plan) if one["response"] == response and one["state"] == "standing"
    ][-1]


def test_the_warnings_read_as_the_story(told):
    """Each planted fault is one warning, in order, rightly named, dated and answered; no other is raised."""
    found = [one for one in warnings(told) if one["response"] in {"energy", None}]
    kinds = [(one["kind"], one["along"], one["level"], one["state"]) for one in found]
    assert kinds == [
        ("drift", "host", "h2", "answered"),
        ("drift", "host", "h3", "answered"),
        ("spread", "order", None, "answered"),
        ("plan", None, None, "standing"),
    ]
    first, second, third, _ = found
    assert first["since_low"] - 10 <= STEP <= first["since_high"] + 10
    assert second["since_low"] - 10 <= STAYS <= second["since_high"] + 10
    assert third["since_low"] - 20 <= NOISY <= third["since_high"] + 20
    assert STEP < first["index"] < REPAIRED
    assert STAYS < second["index"] < ABSORBED
    assert NOISY < third["index"] < QUIET


def test_answers_are_kept_and_shown(told):
    """Every reply stands with its reason and action beside the warning that it answers."""
    from auditd.pipeline.campaign import open_for_queries
    from auditd.pipeline.showing import warning_shown

    campaign = open_for_queries(told)
    actions = {}
    for one in warnings(told):
        for reply in warning_shown(campaign, one["id"])["answers"]:
            actions[one["id"]] = (reply["action"], reply["reason"], reply["from_position"])
    assert [action for action, *_ in actions.values()] == ["restart", "absorb", "restart"]
    assert [position for *_, position in actions.values()] == [REPAIRED, ABSORBED, QUIET]
    assert "fan" in next(iter(actions.values()))[1]


def test_the_store_verifies_after_all_of_it(told):
    """The audit made anew from the stored runs gives every alarm of the last epoch, and no more."""
    from auditd.pipeline.verifying import verify

    assert verify(told) == []
