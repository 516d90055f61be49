"""What to do, and what it costs."""

import re
import typing

import pytest

from auditd.plan_reading import parse_plan
from auditd.records import Kind
from auditd.verdicts.remedy import BY_LOSS, BY_RUNS_AGAIN, cost_runs, remedy

KINDS = typing.get_args(Kind)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(("along", "level"), [("host", "n3"), ("order", None), (None, None)])
def test_every_kind_has_a_remedy_that_ends_with_its_cost_in_runs(make_finding, plan, kind, along, level):
    """Whatever is known of the place; one to three sentences and the cost."""
    told = remedy(make_finding(kind, along, level, n_again=7), plan, n_lost=31.0, n_cells=4)
    assert re.search(r"Cost: (no|((about|at least) )?[\d,]+) runs?\.$", told)
    assert "None" not in told
    assert 60 < len(told) < 480


def test_lost_runs_are_made_up_in_whole_blocks(make_finding):
    """31 effective runs lost over 4 cells: 8 blocks of 4; on 3 hosts alike: 9 blocks, 36 runs."""
    assert cost_runs(make_finding(), n_lost=31.0, n_cells=4) == 32
    assert cost_runs(make_finding(), n_lost=31.0, n_cells=4, n_levels=3) == 36
    assert cost_runs(make_finding(), n_lost=0.0, n_cells=4) == 0


@pytest.mark.parametrize("kind", BY_RUNS_AGAIN)
def test_counted_runs_are_the_cost_of_facts(make_finding, kind):
    """The finding knows how many runs have to be made again."""
    assert cost_runs(make_finding(kind, n_again=17)) == 17


def test_a_cost_that_cannot_be_said_yet_is_said_to_be_so(make_finding, plan):
    """Before the loss can be estimated."""
    assert cost_runs(make_finding()) is None
    assert "not known yet" in remedy(make_finding(), plan)


def test_kinds_that_need_no_runs_say_so(make_finding, plan):
    """An answer, a clock or a plan costs no run."""
    for kind in set(KINDS) - set(BY_LOSS) - set(BY_RUNS_AGAIN):
        assert remedy(make_finding(kind), plan).endswith("Cost: no runs.")


def test_the_cause_is_looked_at_first(make_finding, plan):
    """What changed there stands before the advice."""
    told = remedy(make_finding(), plan, n_lost=8.0, cause="build b2 first ran at r0412")
    assert told.startswith("Look first at what changed: build b2 first ran at r0412.")


def test_a_seed_shared_on_purpose_is_declared_in_the_plan(make_finding, plan):
    """The remedy for unique seeds names the role `block`; for block seeds it does not."""
    assert "seeds.role" in remedy(make_finding("seed", n_again=1), plan)
    block = parse_plan(plan.text + '[seeds]\nrole = "block"\n')
    assert "seeds.role" not in remedy(make_finding("seed", n_again=1), block)
