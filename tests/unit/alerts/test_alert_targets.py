"""Names of targets, the waits between tries, and what is complained of before the first alert."""

import itertools

import pytest

from auditd.alerts.backoff import FIRST_WAIT_S, JITTER, N_TRIES, is_last, wait_s
from auditd.alerts.targets import alert_named, target_complaints, targets_for
from auditd.plan_reading import parse_plan

PLAN = """
[responses.error]
at = "error"
[[alerts]]
to = "command"
argv = ["./tell-me"]
[[alerts]]
to = "url"
url_env = "ALERT_ADDRESS"
grades = ["note", "severe"]
"""


@pytest.fixture
def plan(tmp_path):
    return parse_plan(PLAN, tmp_path / "plan.toml")


@pytest.mark.parametrize(
    ("grade", "names"),
    [("note", ("url:1",)), ("material", ("command:0",)), ("severe", ("command:0", "url:1"))],
)
def test_a_grade_goes_to_the_targets_that_ask_for_it(plan, grade, names):
    """Without `grades`, a target asks for material and severe."""
    assert targets_for(plan, grade) == names


@pytest.mark.parametrize(
    "name", ["command:1", "url:0", "url:2", "url:-1", "url:", "file:0", "command:00001 "]
)
def test_a_name_that_the_plan_does_not_have_names_nothing(plan, name):
    """Kind and place must both agree, so that a plan whose alerts changed places is noticed."""
    assert alert_named(plan, name) is None


def test_what_will_fail_is_said_before_the_first_alert(plan, tmp_path):
    """The program is missing and the variable is not set; then both are there."""
    missing = target_complaints(plan, {"PATH": "/usr/bin"})
    assert len(missing) == 2
    assert "tell-me is not an executable file" in missing[0]
    assert "ALERT_ADDRESS is not set" in missing[1]
    (tmp_path / "tell-me").write_text("#!/bin/sh\n")
    (tmp_path / "tell-me").chmod(0o700)
    assert target_complaints(plan, {"PATH": "/usr/bin", "ALERT_ADDRESS": "json://localhost"}) == ()


def test_waits_double_with_a_jitter_that_is_the_letters_own():
    """The same letter waits the same, two letters do not come in step."""
    waits = [wait_s("a1", n) for n in range(N_TRIES - 1)]
    assert waits == [wait_s("a1", n) for n in range(N_TRIES - 1)]
    assert all(abs(wait / (FIRST_WAIT_S * 2**n) - 1) <= JITTER for n, wait in enumerate(waits))
    assert 30 * 3600 < sum(waits) < 60 * 3600
    others = [wait_s(f"a{k}", 0) for k in range(50)]
    assert max(others) - min(others) > 0.3 * FIRST_WAIT_S
    assert all(one != other for one, other in itertools.pairwise(others))


def test_the_twelfth_failure_is_the_last():
    """Counting from the tries before it."""
    assert [is_last(n) for n in (0, N_TRIES - 2, N_TRIES - 1)] == [False, False, True]
