"""What changed where a finding began."""

from auditd.verdicts.likely_cause import likely_cause
from auditd.verdicts.moments import Change


def _change(moment, position, nuisance="build", level="b2", within=None):
    return Change(nuisance=nuisance, level=level, moment=moment(position), within=within)


def test_the_level_that_first_ran_there_is_named_with_run_and_time(make_finding, moment):
    """A drift dated 405 to 425, and build b2 from 412 on."""
    finding = make_finding(along="order", level=None, since=413, since_low=405, since_high=425, n=2000)
    assert likely_cause(finding, [_change(moment, 412)]) == "build b2 first ran at r0412 (12 May 14:07 UTC)"


def test_a_change_elsewhere_is_not_named(make_finding, moment):
    """Outside the set of dates, at the campaign's first run, or another level of the same nuisance."""
    finding = make_finding(along="order", level=None, since=413, since_low=405, since_high=425, n=2000)
    assert likely_cause(finding, [_change(moment, 500)]) is None
    start = make_finding(along="order", level=None, since=0, since_low=0, since_high=10, n=2000)
    assert likely_cause(start, [_change(moment, 0)]) is None
    other = make_finding(along="build", level="b1", since=413, since_low=405, since_high=425, n=2000)
    assert likely_cause(other, [_change(moment, 412)]) is None


def test_a_level_that_was_different_from_its_first_run_on_is_said_to_be_so(make_finding, moment):
    """The finding is on build b2, and began when b2 did."""
    own = make_finding(along="build", level="b2", since=413, since_low=405, since_high=425, n=2000)
    assert likely_cause(own, [_change(moment, 412)]).startswith("build b2 first ran at r0412")


def test_two_changes_at_once_are_both_named(make_finding, moment):
    """They cannot be told apart, and that is said."""
    finding = make_finding(along="order", level=None, since=413, since_low=405, since_high=425, n=2000)
    told = likely_cause(finding, [_change(moment, 412), _change(moment, 412, "operator", "kit")])
    assert "build b2 and operator kit first ran at r0412" in told
    assert "cannot be told apart" in told


def test_a_nuisance_that_changes_all_the_time_is_not_blamed(make_finding, moment):
    """A new day every forty runs is near any date."""
    finding = make_finding(along="order", level=None, since=413, since_low=395, since_high=425, n=2000)
    days = [_change(moment, 40 * k + 1, "day", f"d{k}") for k in range(1, 50)]
    assert likely_cause(finding, days) is None
    assert likely_cause(finding, [*days, _change(moment, 412)]).startswith("build b2")


def test_a_change_on_one_host_concerns_that_host_only(make_finding, moment):
    """Build b2 reached n3 at run 215."""
    on_n3 = _change(moment, 215, within=("host", "n3"))
    assert likely_cause(make_finding(n=2000), [on_n3]).startswith("build b2 first ran on host n3 at r0215")
    assert likely_cause(make_finding(level="n4", n=2000), [on_n3]) is None


def test_without_a_date_nothing_is_named(make_finding, moment):
    """A finding that cannot be dated has no cause by date."""
    undated = make_finding(since=None, since_low=None, since_high=None)
    assert likely_cause(undated, [_change(moment, 412)]) is None
