"""Silence: told once a silence, withdrawn when runs land, whatever the clock does."""

from types import SimpleNamespace

import pytest

from auditd.pipeline.silence import SilenceWatch
from auditd.plan_reading import parse_plan

PLAN = '[responses.y]\nat = "y"\n'


class Told(SimpleNamespace):
    """What the watch says to a session, and what it asks of it."""

    def raise_outside(self, findings):
        self.said += [finding.key for finding in findings]

    def withdraw(self, kind, message):
        self.said.append(f"withdrawn {kind}")


def session(n=5, landed_at=1000.0):
    return Told(n_arrived=n, landed_at=landed_at, last_run="r4", said=[])


def test_it_is_told_once_and_withdrawn_when_runs_land_again():
    """An hour of silence is one warning, however often anyone looks; the next run takes it back."""
    watch, heard = SilenceWatch(parse_plan(PLAN + '[silence]\nafter = "1h"\n')), session()
    for now in (1000.0, 4599.0):
        watch.look(heard, now)
    assert [one for one in heard.said if "withdrawn" not in one] == []
    for now in (4601.0, 5000.0, 9000.0):
        watch.look(heard, now)
    assert len([one for one in heard.said if "withdrawn" not in one]) == 1
    heard.said.clear()
    heard.n_arrived, heard.landed_at = 6, 9001.0
    watch.look(heard, 9002.0)
    assert heard.said == ["withdrawn silence"]


def test_a_second_silence_is_told_again():
    """After runs have landed, another silence is news."""
    watch, heard = SilenceWatch(parse_plan(PLAN + '[silence]\nafter = "1h"\n')), session()
    watch.look(heard, 1000.0)
    watch.look(heard, 5000.0)
    heard.n_arrived, heard.landed_at = 6, 6000.0
    watch.look(heard, 6001.0)
    watch.look(heard, 9601.0)
    assert len([one for one in heard.said if "withdrawn" not in one]) == 2


@pytest.mark.parametrize("now", [0.0, 1e9])
def test_without_a_section_nothing_is_ever_said(now):
    """A plan without [silence] is silent about silence."""
    heard = session()
    SilenceWatch(parse_plan(PLAN)).look(heard, now)
    assert heard.said == []
