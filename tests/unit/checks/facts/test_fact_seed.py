"""One seed, two runs."""

from auditd.checks.facts.seed import SeedFact

BLOCK = '\n[seeds]\nrole = "block"\n'


def test_a_seed_used_twice_is_told_at_once_with_both_runs(make_plan, make_run):
    """The second run of a seed raises the finding, which names both runs and one run to be made again."""
    fact = SeedFact(make_plan(), alarm_budget=0.01)
    assert not fact.arrived(make_run(0, seed="7"), 0)
    (found,) = fact.arrived(make_run(1, seed="7"), 1)
    assert (found.kind, found.run, found.n_again, found.holds) == ("seed", "r0001", 1, True)
    assert "r0000" in found.message
    assert found.cells == ("solver=implicit mesh=fine",)


def test_distinct_seeds_are_silent_also_when_they_read_alike(make_plan, make_run, tell):
    """Seeds are texts: "7" and "07" differ, and so do two seeds of 128 bits that agree in 20 digits."""
    runs = [
        make_run(0, seed="7"),
        make_run(1, seed="07"),
        make_run(2, seed="1" * 38),
        make_run(3, seed="1" * 37 + "2"),
    ]
    assert not tell(SeedFact(make_plan(), alarm_budget=0.01), runs)


def test_block_seeds_may_serve_several_cells_but_once_in_each(make_plan, make_run, tell):
    """With common random numbers one seed in two cells is meant; in one cell it is not."""
    fact = SeedFact(make_plan(BLOCK), alarm_budget=0.01)
    pairs = [
        make_run(2 * i + j, seed=f"{i}", cell={"solver": s}) for i in range(9) for j, s in enumerate("ab")
    ]
    assert not tell(fact, pairs)
    found = tell(fact, [make_run(50, seed="3", cell={"solver": "a"})])
    assert [finding.cells for finding in found.values()] == [("solver=a mesh=fine",)]


def test_unique_seeds_may_not_serve_two_cells(make_plan, make_run, tell):
    """With the role `unique` the same seed in another cell is told."""
    runs = [make_run(0, seed="3"), make_run(1, seed="3", cell={"solver": "explicit"})]
    assert tell(SeedFact(make_plan(), alarm_budget=0.01), runs)


def test_failed_runs_and_runs_of_one_lineage_may_share_a_seed(make_plan, make_run, tell):
    """A restart keeps its parent's seed, and a run that did not complete used its seed up for nothing."""
    runs = [
        make_run(0, seed="1", completed=False),
        make_run(1, seed="1", parent="r0000"),
        make_run(2, seed="1", parent="r0001"),
        make_run(3, seed="2", completed=False),
        make_run(4, seed="2"),
    ]
    assert not tell(SeedFact(make_plan(), alarm_budget=0.01), runs)


def test_a_link_that_lands_later_withdraws_the_finding(make_plan, make_run, tell):
    """r2 continues r1, which lands last and continues r0: the shared seed was no fault."""
    fact = SeedFact(make_plan(), alarm_budget=0.01)
    found = tell(fact, [make_run(0, seed="1"), make_run(2, seed="1", parent="r0001")])
    assert [finding.holds for finding in found.values()] == [True]
    found = tell(fact, [make_run(1, seed="9", parent="r0000")])
    assert [(finding.holds, finding.n) for finding in found.values()] == [(False, 0)]


def test_a_sharing_long_after_the_last_is_a_condition_of_its_own(make_plan, make_run, tell):
    """What was answered on Monday does not hide what happens on Friday."""
    runs = [make_run(i, seed="1" if i in {0, 1, 2, 400} else f"s{i}") for i in range(401)]
    found = tell(SeedFact(make_plan(), alarm_budget=0.01), runs)
    assert [(finding.run, finding.n_again) for finding in found.values()] == [("r0001", 2), ("r0400", 1)]
