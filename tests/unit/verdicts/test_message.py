"""A sentence for three in the morning."""

import pytest

from auditd.records import Effect
from auditd.verdicts.message import SEQUENTIAL, message
from auditd.verdicts.moments import Dated


def test_a_drift_says_what_where_how_much_and_since_when(make_finding, moment):
    """All of it in one sentence."""
    told = message(
        make_finding(),
        dated=Dated(
            last_before=moment(211), first_after=moment(212), earliest=moment(205), latest=moment(220)
        ),
        cause="build b2 first ran on host n3 at r0212",
    )
    assert told == (
        "lift on host n3 has moved away from its earlier level: shift 0.8 (95% interval 0.5 to 1.1), "
        "since r0212 (12 May 08:33 UTC) (it may have begun anywhere from r0205 to r0220); "
        "build b2 first ran on host n3 at r0212"
    )


def test_a_gap_in_the_runs_leaves_the_date_unknown(make_finding, moment):
    """Nobody ran between r0100 and r0212."""
    told = message(make_finding(), dated=Dated(last_before=moment(100), first_after=moment(212), gap=True))
    assert "at a date unknown between r0100" in told
    assert "and r0212" in told


@pytest.mark.parametrize("kind", SEQUENTIAL)
@pytest.mark.parametrize(("along", "level"), [("order", None), ("host", None), ("host", "n3")])
def test_every_sequential_kind_has_a_sentence_with_the_response(make_finding, kind, along, level):
    """One line, the response named, and the level where there is one and the kind has a place."""
    told = message(make_finding(kind, along, level))
    assert told.startswith(("lift", "runs of lift", "the scatter of lift"))
    assert "None" not in told
    assert "\n" not in told
    if level and kind not in {"clock", "lineage"}:
        assert "n3" in told


def test_an_effect_without_an_interval_says_why(make_finding):
    """Too few runs after the alarm."""
    assert "too few runs for an interval" in message(make_finding(effect=Effect(name="shift", value=0.8)))


def test_facts_keep_their_own_sentence(make_finding):
    """A fact knows its numbers; the cause is added."""
    fact = make_finding("confound", message="not separable: every run of explicit ran on n2")
    assert message(fact) == "not separable: every run of explicit ran on n2"
    lineage = make_finding("lineage", key="lineage:missing", message="a run names a parent that never landed")
    assert message(lineage) == lineage.message
