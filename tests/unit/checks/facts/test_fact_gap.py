"""Numbers that are missing or used twice."""

from auditd.checks.facts.gap import GapFact


def _place(fact, runs):
    return [finding for n, run in enumerate(runs) for finding in fact.placed(run, n)] + list(fact.standing())


def test_a_number_that_was_passed_over_is_told(make_plan, make_run):
    """3 and 4 never landed; the finding comes with the run that passed them."""
    fact = GapFact(make_plan(), alarm_budget=0.01)
    found = _place(fact, [make_run(i) for i in (0, 1, 2, 5, 6)])[-1]
    assert (found.key, found.run, found.n_again) == ("gap:sequence", "r0005", 2)
    assert "3, 4" in found.message


def test_a_whole_sequence_is_silent_wherever_it_begins_and_with_failed_runs(make_plan, make_run):
    """Numbers from 17 on, one of the runs failed and said so."""
    runs = [make_run(i, completed=i != 20) for i in range(17, 60)]
    assert not _place(GapFact(make_plan(), alarm_budget=0.01), runs)


def test_late_numbers_close_the_gap(make_plan, make_run):
    """What lands after its place has passed is late, not missing."""
    fact = GapFact(make_plan(), alarm_budget=0.01)
    assert _place(fact, [make_run(i) for i in (0, 1, 3)])
    assert not list(fact.arrived(make_run(2), 3))
    (found,) = fact.standing()
    assert not found.holds


def test_a_replay_that_tells_of_landings_first_finds_what_the_campaign_found(make_plan, make_run):
    """After a restart a late number is heard of before the gap that it closed: no gap then either."""
    fact = GapFact(make_plan(), alarm_budget=0.01)
    for i in (0, 1, 3, 2):
        fact.arrived(make_run(i), i)
    assert not _place(fact, [make_run(i) for i in (0, 1, 3)])


def test_a_number_used_twice_is_told(make_plan, make_run):
    """Two runs are number 2."""
    runs = [make_run(0), make_run(1), make_run(2), make_run(7, sequence=2), make_run(3)]
    (found,) = _place(GapFact(make_plan(), alarm_budget=0.01), runs)
    assert (found.key, found.run) == ("gap:twice", "r0007")


def test_under_another_order_numbers_may_be_a_hundred_out_of_place(make_plan, make_run):
    """Ordered by start, numbers come shuffled; only one that stays away for a hundred numbers is missing."""
    plan = make_plan('\n[order]\nby = "started"\n')
    numbers = [
        k
        for start in range(0, 600, 6)
        for k in (start + 5, start + 1, start, start + 2, start + 4, start + 3)
    ]
    whole = [make_run(0)] + [make_run(i) for i in numbers if i]
    assert not _place(GapFact(plan, alarm_budget=0.01), whole)
    runs = [make_run(0)] + [make_run(i) for i in numbers if i not in {0, 250}]
    found = [
        finding for finding in _place(GapFact(plan, alarm_budget=0.01), runs) if finding.key == "gap:sequence"
    ]
    assert found[-1].n == 1
    assert "250" in found[-1].message
