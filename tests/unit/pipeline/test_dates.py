"""Dates: the last run before and the first after, on the runs that a finding is about."""

import numpy as np
import pytest
from run_tables import table_of

from auditd.pipeline.dates import changes, dated
from auditd.records import Finding
from auditd.verdicts.message import message

HOSTS = ["n1", "n2"] * 20


def finding(**fields):
    stated = {"key": "k", "kind": "drift", "message": "", "along": "host", "level": "n2", "response": "y"}
    return Finding(**(stated | fields))


def made(**changed):
    return table_of({"y": np.zeros(40)}, nuisance={"host": HOSTS}, **changed)


def test_dates_are_runs_of_the_level_itself():
    """On host n2 (odd runs) a change at position 20 lies between r0019 and r0021."""
    found = dated(finding(since=20, since_low=11, since_high=31), made())
    assert (found.last_before.run, found.first_after.run) == ("r0019", "r0021")
    assert (found.earliest.run, found.latest.run) == ("r0011", "r0031")
    assert found.first_after.position == 21
    assert not found.gap


def test_along_the_order_every_run_counts():
    """Without a level the neighbours in the whole order are named."""
    found = dated(finding(along="order", level=None, since=20), made())
    assert (found.last_before.run, found.first_after.run) == ("r0019", "r0020")
    assert found.earliest is None


@pytest.mark.parametrize(("since", "before", "after"), [(0, None, "r0001"), (500, "r0037", "r0039")])
def test_dates_at_either_end_name_a_run(since, before, after):
    """A change as old as the campaign has no run before it; one past the end names the last run."""
    found = dated(finding(since=since), made())
    if since:
        assert found.first_after.run == after
    else:
        assert (found.last_before, found.first_after.run) == (before, after)


def test_nothing_is_dated_without_a_date_or_a_run():
    """A finding without a date, or about no placed run, has none."""
    assert dated(finding(), made()) is None
    assert dated(finding(since=3), made(positions=np.full(40, -1))) is None


def test_a_gap_is_told_as_unknown_between():
    """Two days without a run before the change make the date unknown between its neighbours."""
    started = 1_800_000_000.0 + 600.0 * np.arange(40)
    started[20:] += 2 * 86_400
    one = finding(since=20)
    found = dated(one, made(started=started))
    assert found.gap
    text = message(one, dated=found)
    assert "at a date unknown between r0019" in text
    assert "and r0021" in text


def test_a_short_gap_is_not_told():
    """Fifty minutes do not change what an operator would look at, however regular the runs were."""
    started = 1_800_000_000.0 + 60.0 * np.arange(40)
    started[20:] += 50 * 60
    assert not dated(finding(since=20), made(started=started)).gap


def test_late_runs_have_no_date():
    """A run without a place is no neighbour of a change."""
    positions = np.concatenate([np.arange(21), [-1], np.arange(21, 39)])
    found = dated(finding(since=20), made(positions=positions))
    assert found.first_after.run != "r0021"
    assert found.first_after.position >= 20


def test_changes_are_first_appearances_in_the_campaign_and_within_other_levels():
    """Build b2 first ran at r0010, on host n2 at r0011; host n1's and n2's first runs are told too."""
    table = table_of({"y": np.zeros(40)}, nuisance={"host": HOSTS, "build": ["b1"] * 10 + ["b2"] * 30})
    found = {(one.nuisance, one.level, one.within): one.moment.run for one in changes(table)}
    assert found["build", "b2", None] == "r0010"
    assert found["build", "b2", ("host", "n2")] == "r0011"
    assert found["host", "n2", None] == "r0001"
    assert ("build", "b1", ("host", "n1")) not in found
