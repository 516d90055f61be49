"""Findings that come from no run."""

import datetime as dt

from auditd.checks.facts.plan import plan_finding
from auditd.checks.facts.silence import silence_finding

NOON = dt.datetime(2026, 3, 1, 12, tzinfo=dt.UTC)


def _silence(after_noon_s):
    now = NOON + dt.timedelta(seconds=after_noon_s)
    return silence_finding(last_landed=NOON, now=now, after_s=3600.0, last_run="r7", n=8)


def test_silence_holds_from_its_time_on_under_one_key():
    """One second short of an hour is none; a longer silence stays the same warning."""
    assert not _silence(3599).holds
    assert _silence(3600).holds
    assert _silence(3600).key == _silence(7200).key
    assert "r7" in _silence(9000).message
    assert "2.5 h" in _silence(9000).message


def test_a_changed_plan_names_its_fields_and_the_reason():
    """The finding of a version says what differs, and after how many runs."""
    found = plan_finding(
        version=2,
        changed=["responses.lift.margin"],
        reason="a slip in it",
        position=120,
        run="r0119",
    )
    assert (found.kind, found.key, found.since) == ("plan", "plan:2", 120)
    assert "responses.lift.margin" in found.message
    assert "a slip in it" in found.message
