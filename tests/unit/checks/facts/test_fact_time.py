"""Times that cannot be true."""

from auditd.checks.facts.time import TimeFact


def test_a_run_that_finishes_before_it_starts_is_told(make_plan, make_run, tell):
    """The clock went back during the run, on the host that is named."""
    (found,) = tell(TimeFact(make_plan(), alarm_budget=0.01), [make_run(0, length_s=-30.0)]).values()
    assert (found.key, found.level) == ("time:backward:n1", "n1")
    assert "30 s before it started" in found.message


def test_two_runs_at_once_on_an_exclusive_host_are_told(make_plan, make_run, tell):
    """The second run starts ten seconds before the first has ended."""
    runs = [make_run(0, start_s=0, length_s=50), make_run(1, start_s=40, length_s=50)]
    (found,) = tell(TimeFact(make_plan(), alarm_budget=0.01), runs).values()
    assert (found.key, found.run, found.along, found.level) == ("time:overlap:host=n1", "r0001", "host", "n1")


def test_runs_end_to_end_or_on_two_hosts_are_silent(make_plan, make_run, tell):
    """Back to back, landed out of order, overlapping by the rounding of whole seconds, and side by side."""
    runs = [make_run(i, start_s=50 * i, length_s=50) for i in (3, 1, 0, 2)]
    runs += [make_run(9, start_s=199, length_s=20), make_run(10, start_s=0, nuisance={"host": "n2"})]
    assert not tell(TimeFact(make_plan(), alarm_budget=0.01), runs, place=False)


def test_slots_allow_so_many_runs_at_once_and_no_more(make_plan, make_run, tell):
    """Two slots: two at once are right, also in a chain of overlaps; three are not."""
    plan = make_plan(text=PLAN_SLOTS)
    chain = [make_run(i, start_s=50 * i, length_s=90) for i in range(10)]
    assert not tell(TimeFact(plan, alarm_budget=0.01), chain)
    three = [make_run(i, start_s=10 * i, length_s=90) for i in range(3)]
    assert tell(TimeFact(plan, alarm_budget=0.01), three)


def test_a_start_that_goes_back_against_the_numbers_is_a_clock_step(make_plan, make_run, tell):
    """Run 2 on n1 started before run 1 did: its clock was set back. Another host's clock is its own."""
    runs = [make_run(0, start_s=0), make_run(1, start_s=1000), make_run(2, start_s=500)]
    assert "time:clock:host=n1" in tell(TimeFact(make_plan(), alarm_budget=0.01), runs)
    runs[2] = make_run(2, start_s=500, nuisance={"host": "n2"})
    assert not tell(TimeFact(make_plan(), alarm_budget=0.01), runs)


def test_many_overlaps_on_one_host_are_one_condition(make_plan, make_run, tell):
    """One warning a host, with the count."""
    runs = [make_run(i, start_s=20 * i, length_s=50, nuisance={"host": f"n{i % 2}"}) for i in range(40)]
    found = tell(TimeFact(make_plan(), alarm_budget=0.01), runs, place=False)
    assert sorted(found) == ["time:overlap:host=n0", "time:overlap:host=n1"]
    assert {finding.n for finding in found.values()} == {19}


PLAN_SLOTS = """
[record]
started = "start"
finished = "end"
[responses.lift]
at = "lift"
[nuisance]
host = "host"
[machines]
exclusive = ["host"]
slots = 2
"""
