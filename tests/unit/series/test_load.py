"""The table as read from a store: true order, labels, and what answers set aside."""

import random

import numpy as np
import pytest
from campaigns_made import PLAN, append, lay_out, records
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.gathering import gather
from auditd.pipeline.replying import reply
from auditd.plan_reading import parse_plan
from auditd.series.load import load_table, nuisance_levels, order_of, response_names, scope_flags


@pytest.fixture(scope="module")
def stored(tmp_path_factory):
    """120 runs of which 30 to 32 failed, landed in a random order, and their records in order of start."""
    folder = tmp_path_factory.mktemp("loaded")
    plan = lay_out(folder)
    made = records(120, failing=range(30, 33))
    made[5]["seed"] = made[4]["seed"]
    append(folder, random.Random(3).sample(made, len(made)))
    gather(plan, lambda _step, _totals: None)
    return plan, made


def table_in(plan_path):
    campaign = open_for_queries(plan_path)
    with campaign.engine.connect() as connection:
        return load_table(connection, campaign.plan)


def test_columns_are_what_was_landed_in_the_order_of_start(stored):
    """Whatever the order of landing, runs stand in the order of their starts, each with its own values."""
    table = table_in(stored[0])
    assert table.ids.tolist() == [record["id"] for record in stored[1]]
    assert table.positions.tolist() == list(range(120))
    assert table.nuisance["host"].labels().tolist() == [record["env"]["host"] for record in stored[1]]
    energy = np.array([record["out"]["energy"] for record in stored[1]])
    np.testing.assert_array_equal(table.responses["energy"][table.completed], energy[table.completed])
    assert (~table.completed).nonzero()[0].tolist() == [30, 31, 32]
    assert table.seeds.codes[5] == table.seeds.codes[4]


@pytest.mark.parametrize(
    ("text", "order"),
    [
        ("", "arrival"),
        ('[record]\nstarted = "s"\n', "started"),
        ('[record]\nstarted = "s"\nsequence = "n"\n', "sequence"),
        ('[record]\nstarted = "s"\nsequence = "n"\n[order]\nby = "arrival"\n', "arrival"),
    ],
)
def test_the_order_is_the_best_that_is_stated(text, order):
    """Sequence before start before arrival, unless the plan says (design, section 7)."""
    assert order_of(parse_plan(text + '[responses.y]\nat = "y"\n')) == order


def test_automatic_responses_need_their_fields():
    """`duration` needs both times, `completed` a status."""
    assert response_names(parse_plan('[record]\nstarted = "s"\n[responses.y]\nat = "y"\n')) == ("y",)
    assert response_names(parse_plan(PLAN)) == ("energy", "steps", "duration", "completed")


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(first=st.integers(0, 119), last=st.integers(0, 119), host=st.sampled_from(["h1", "h4", "h9", None]))
def test_a_scope_takes_its_runs_and_no_others(stored, first, last, host):
    """Level, from and to hold together, by run as by time."""
    table = table_in(stored[0])
    level = {} if host is None else {"host": host}
    by_run = scope_flags(table, level | {"from": f"r{first:05d}", "to": f"r{last:05d}"})
    times = [stored[1][k]["time"]["start"] for k in (first, last)]
    by_time = scope_flags(table, level | {"from": times[0], "to": times[1]})
    on = np.array([host in {None, record["env"]["host"]} for record in stored[1]])
    expected = (np.arange(120) >= first) & (np.arange(120) <= last) & on
    np.testing.assert_array_equal(by_run, expected)
    np.testing.assert_array_equal(by_time, expected)


def test_times_without_an_offset_are_utc(stored):
    """The zone of the machine that asks decides nothing."""
    table = table_in(stored[0])
    naive = scope_flags(table, {"from": "2027-03-01T10:00:00"})
    np.testing.assert_array_equal(naive, scope_flags(table, {"from": "2027-03-01T10:00:00Z"}))
    assert naive.sum() == 60


def test_levels_are_those_that_runs_have(stored):
    """The labels of a nuisance, sorted."""
    with open_for_queries(stored[0]).engine.connect() as connection:
        assert nuisance_levels(connection, "host") == ["h1", "h2", "h3", "h4"]


def test_an_answer_sets_its_runs_aside(tmp_path):
    """What an answer takes out is out of every series, and in again where both are asked for."""
    plan = lay_out(tmp_path)
    made = records(60)
    made[5]["seed"] = made[4]["seed"]
    append(tmp_path, made)
    gather(plan, lambda _step, _totals: None)
    reply(plan, "W1", "one seed twice", "set-aside", {"from": "r00004", "to": "r00005"})
    table = table_in(plan)
    assert table.set_aside.nonzero()[0].tolist() == [4, 5]
    assert len(table.series(parse_plan(PLAN), "energy").values) == 58
    assert len(table.series(parse_plan(PLAN), "energy", with_set_aside=True).values) == 60
