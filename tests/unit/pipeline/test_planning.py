"""Schedules from a plan, and what of them has not landed."""

import pytest
from campaigns_made import PLAN, append, lay_out, records

from auditd.errors import BadInput
from auditd.pipeline.gathering import gather
from auditd.pipeline.planning import host_name, schedule_of
from auditd.plan_reading import parse_plan

SCHEDULE = '[schedule]\nreplicates = 2\nhosts = ["h1", "h2"]\nlevels = {scheme = ["direct", "staged"]}\n'


def made(path, **changed):
    asked = {"replicates": None, "hosts": None, "seed": 5, "only_rest": False} | changed
    return schedule_of(path, **asked)


def test_the_plans_numbers_hold_unless_others_are_asked(tmp_path):
    """Two replicates on two hosts of two cells are eight runs; what the command says goes before."""
    path = lay_out(tmp_path, PLAN + SCHEDULE)
    assert len(made(path).runs) == 8
    assert len(made(path, replicates=3, hosts=["a", "b", "c"]).runs) == 18
    assert made(path).runs == made(path).runs


def test_what_has_landed_is_left_out(tmp_path):
    """A run that landed with its cell, host and seed is done; another seed does not do it."""
    path = lay_out(tmp_path, PLAN + SCHEDULE)
    whole = made(path).runs
    assert made(path, only_rest=True).runs == whole
    done = whole[2]
    record = records(1)[0] | {"seed": done.seed, "cfg": dict(done.cell), "env": {"host": done.host}}
    append(tmp_path, [record])
    gather(path, lambda _step, _totals: None)
    rest = made(path, only_rest=True).runs
    assert len(rest) == 7
    assert done.seed not in [one.seed for one in rest]


@pytest.mark.parametrize("schedule", ["", "[schedule]\nreplicates = 2\n"])
def test_a_plan_without_levels_says_what_to_add(tmp_path, schedule):
    """The message shows a line to add."""
    with pytest.raises(BadInput, match="levels = "):
        made(lay_out(tmp_path, PLAN + schedule))


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ('[nuisance]\nnode = "n"\nhost = "h"\n[machines]\nexclusive = ["node"]\n', "node"),
        ('[nuisance]\nhost = "h"\n', "host"),
        ('[nuisance]\nday = {from = "started", by = "day"}\n[record]\nstarted = "s"\n', None),
    ],
)
def test_machines_are_the_exclusive_nuisance_or_the_one_called_host(text, name):
    """Where neither is there, no host is assumed."""
    assert host_name(parse_plan('[responses.y]\nat = "y"\n' + text)) == name
