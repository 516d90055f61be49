"""Runs that continue others."""

from auditd.checks.facts.lineage import LineageFact


def test_completed_runs_that_continue_completed_runs_are_told(make_plan, make_run, tell):
    """Every tenth run continues the one before it: share, depth and runs to be made again are named."""
    runs = [make_run(i, parent=f"r{i - 1:04d}" if i % 10 == 9 else None) for i in range(100)]
    (found,) = tell(LineageFact(make_plan(), alarm_budget=0.01), runs).values()
    assert (found.key, found.n_again, found.share) == ("lineage:continued", 10, 0.1)
    assert "chains of up to 2" in found.message


def test_restarts_of_runs_that_failed_are_silent(make_plan, make_run, tell):
    """A run that took up a failed one's checkpoint is the only sample of its chain."""
    runs = []
    for i in range(0, 100, 2):
        runs += [make_run(i, completed=False), make_run(i + 1, parent=f"r{i:04d}")]
    assert not tell(LineageFact(make_plan(), alarm_budget=0.01), runs)


def test_a_chain_whose_failed_link_lands_last_is_still_followed(make_plan, make_run, tell):
    """A grandchild of a completed run counts, though the failed run between them lands after it."""
    runs = []
    for i in range(0, 60, 3):
        child = make_run(i + 2, parent=f"r{i + 1:04d}")
        runs += [make_run(i), child, make_run(i + 1, parent=f"r{i:04d}", completed=False)]
    found = tell(LineageFact(make_plan(), alarm_budget=0.01), runs, place=False)
    assert found["lineage:continued"].n_again == 20


def test_a_cycle_is_told_and_ends_no_loop(make_plan, make_run, tell):
    """r0 names r2, r1 names r0, r2 names r1."""
    runs = [make_run(i, parent=f"r{(i + 2) % 3:04d}") for i in range(3)]
    assert "lineage:cycle" in tell(LineageFact(make_plan(), alarm_budget=0.01), runs, place=False)
    assert "lineage:cycle" in tell(LineageFact(make_plan(), alarm_budget=0.01), [make_run(7, parent="r0007")])


def test_a_parent_that_never_landed_is_told_and_withdrawn_when_it_does(make_plan, make_run, tell):
    """The missing parent is named; its late landing ends the finding."""
    fact = LineageFact(make_plan(), alarm_budget=0.01)
    found = tell(fact, [make_run(1, parent="r0000")])["lineage:missing"]
    assert found.holds
    assert "r0000" in found.message
    assert not tell(fact, [make_run(0)])["lineage:missing"].holds


def test_without_stated_parents_nothing_is_asked(make_run, make_plan, tell):
    """A plan that names no parent asks nothing of lineage."""
    plan = make_plan(text='[responses.lift]\nat = "lift"\n')
    assert not tell(LineageFact(plan, alarm_budget=0.01), [make_run(1, parent="r0000")])
