"""A rehearsal keeps its shape, and its figures agree with what is planted."""

import json

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.plan_reading import parse_plan
from auditd.schedule import rehearse, scenario_named
from auditd.schedule.rehearsal import rehearsal_document
from auditd.schedule.runs_needed import runs_to_decide, runs_to_detect
from auditd.schedule.scenarios import EXCHANGEABLE

PLAN = """
[responses.error]
at = "error"
margin = 0.1
[factors]
solver = "solver"
mesh = "mesh"
[nuisance]
node = "node"
[schedule]
replicates = 15
hosts = ["n1", "n2", "n3", "n4"]
levels = {solver = ["implicit", "explicit"], mesh = ["fine", "coarse"]}
[[comparisons]]
response = "error"
between = [{solver = "implicit"}, {solver = "explicit"}]
"""
FIELDS = {
    "name", "kind", "strength", "alarm_share", "alarm_low", "alarm_high", "median_run", "lead_share",
    "coverage", "coverage_low", "coverage_high", "width", "naive_width",
}  # fmt: skip


@pytest.fixture(scope="module")
def plan():
    return parse_plan(PLAN)


@pytest.fixture(scope="module")
def rehearsal(plan):
    scenarios = [scenario_named(text) for text in ("ar=0.7", "icc=0.6", "host-step=4")]
    return rehearse(plan, scenarios, n_campaigns=60, seed=3)


def test_document_has_the_published_fields_and_the_exchangeable_scenario_first(rehearsal):
    document = json.loads(json.dumps(rehearsal_document(rehearsal)))
    assert document["schema"] == 1
    assert document["campaigns"] == 60
    assert [set(scenario) for scenario in document["scenarios"]] == [FIELDS] * 4
    assert document["scenarios"][0]["name"] == EXCHANGEABLE.name
    assert document["scenarios"][0]["lead_share"] is None


def test_false_alarms_stay_within_the_budget_and_intervals_cover(rehearsal):
    exchangeable = rehearsal.scenarios[0]
    assert exchangeable.alarm_low <= 0.05
    assert exchangeable.coverage_high >= 0.95
    assert 0.2 < exchangeable.width < 1.5


def test_strong_dependence_is_found_early_and_named(rehearsal):
    serial, batch, step = rehearsal.scenarios[1:]
    assert serial.alarm_share == 1.0
    assert serial.lead_share >= 0.88  # the share that the audit is calibrated to name rightly
    assert serial.median_run < 80
    assert batch.alarm_share > 0.9
    assert step.alarm_share > 0.95
    assert step.median_run > 120


def test_same_seed_gives_the_same_rehearsal(plan):
    once, again = (rehearse(plan, [scenario_named("ar=0.5")], n_campaigns=3, seed=9) for _ in range(2))
    other = rehearse(plan, [scenario_named("ar=0.5")], n_campaigns=3, seed=10)
    assert once == again
    assert once != other


def test_progress_is_told_to_the_end(plan):
    told = []
    rehearse(
        plan, [scenario_named("ar=0.5")], n_campaigns=2, progress=lambda done, of: told.append((done, of))
    )
    assert told == [(1, 4), (2, 4), (3, 4), (4, 4)]


def test_runs_to_detect_is_the_run_by_which_four_in_five_alarmed():
    assert runs_to_detect("x", [10, 20, 30, 40, None]).runs == 40
    assert runs_to_detect("x", [10, 20, 30, None, None]).runs is None


def test_runs_to_decide_equal_the_power_of_two_one_sided_tests(plan):
    """With the stated runs the two one-sided z tests agree on `within` in 80 % of simulated campaigns."""
    needed = next(entry for entry in runs_to_decide(plan, n_cells=4) if entry.spread == pytest.approx(0.2))
    a_side = needed.runs // 2
    rng = np.random.default_rng(4)
    error = 0.2 * np.sqrt(2 / a_side)
    estimates = rng.normal(0, error, 20000)
    within = np.abs(estimates) + 1.6448536 * error < 0.1
    assert within.mean() == pytest.approx(0.8, abs=0.02)


def test_scenarios_along_hosts_are_left_out_with_a_remark_where_there_is_one(plan):
    single = parse_plan(PLAN.replace('["n1", "n2", "n3", "n4"]', '["n1"]'))
    played = rehearse(single, [scenario_named("icc=0.1")], n_campaigns=2)
    assert [scenario.name for scenario in played.scenarios] == ["exchangeable"]
    assert any("icc=0.1 needs two hosts" in remark for remark in played.remarks)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("nonsense", "no scenario"),
        ("icc", "no scenario"),
        ("icc=x", "not a number"),
        ("ar=1.5", "between"),
        ("icc=nan", "between"),
    ],
)
def test_scenarios_that_are_none_are_refused(text, message):
    with pytest.raises(BadInput, match=message):
        scenario_named(text)


def test_plan_without_schedule_or_levels_is_refused():
    bare = PLAN.split("[schedule]", maxsplit=1)[0]
    with pytest.raises(BadInput, match="no \\[schedule\\]"):
        rehearse(parse_plan(bare))
    with pytest.raises(BadInput, match="lacks mesh"):
        rehearse(parse_plan(PLAN.replace(', mesh = ["fine", "coarse"]}', "}")))
    with pytest.raises(BadInput, match="n_campaigns"):
        rehearse(parse_plan(PLAN), n_campaigns=0)
