"""Error rates, delays and names of the sequential audit; tables.py makes the complete tables."""

from dataclasses import replace

import numpy as np
import pytest
from daemon_campaigns import DAEMON_NULLS, WITHHELD, DaemonScenario, audited, halving
from scipy import stats
from sequential_scenarios import ALTERNATIVES, NULLS, Scenario, campaign, step

from auditd.sequential import cells_within_stages, replay, seed_blocks

BUDGET = 0.05
N_NULL, N_ALTERNATIVE, N_DAEMON = 120, 60, 40
BY_NAME = {scenario.name: scenario for scenario in ALTERNATIVES}


def not_more_than(hits, n, share):
    """Whether so many hits are plausible (P > 1e-3) when the probability is at most `share`."""
    return stats.binom.sf(hits - 1, n, share) > 1e-3


def alarms_of(scenario, n_campaigns):
    return [replay(**campaign(scenario, [5, number])).alarms for number in range(n_campaigns)]


@pytest.mark.slow
@pytest.mark.parametrize("scenario", NULLS, ids=lambda scenario: scenario.name)
def test_exchangeable_runs_alarm_no_more_often_than_the_budget(scenario):
    """Share of campaigns of 1,000 exchangeable runs with any alarm: within the binomial bound of 0.05."""
    assert not_more_than(sum(bool(alarms) for alarms in alarms_of(scenario, N_NULL)), N_NULL, BUDGET)


@pytest.mark.slow
@pytest.mark.parametrize(
    "scenario", [s for s in ALTERNATIVES if s.n_runs <= 1000], ids=lambda scenario: scenario.name
)
def test_planted_dependence_is_found_in_time_and_named(scenario):
    """Median delay and leading kind reach their levels, up to the chance of a small sample (P > 1e-3)."""
    found = alarms_of(scenario, N_ALTERNATIVE)
    late = sum(not alarms or alarms[0].index > scenario.median_level for alarms in found)
    assert not_more_than(late, N_ALTERNATIVE, 0.5)
    first = [alarms[0] for alarms in found if alarms]
    if scenario.lead_level:
        wrong = sum(alarm.key not in scenario.planted for alarm in first)
        assert not_more_than(wrong, len(first), 1 - scenario.lead_level)
    if scenario.host_level:
        rightly = [alarm for alarm in first if alarm.key in scenario.planted]
        assert not_more_than(sum(a.level != "0" for a in rightly), len(rightly), 1 - scenario.host_level)
    after = [alarm for alarm in first if alarm.index >= scenario.start]
    if not scenario.clock_level:
        missed = sum(not alarm.since_low <= scenario.start <= alarm.since_high for alarm in after)
        assert not_more_than(missed, len(after), 0.1)


@pytest.mark.slow
def test_a_daily_cycle_is_named_clock_after_the_fourth_day():
    """`clock` takes over the warning of whichever family alarmed first."""
    scenario = BY_NAME["daily cycle of amplitude 0.5 sd"]
    taken = 0
    for alarms in alarms_of(scenario, N_ALTERNATIVE):
        clock = [a for a in alarms if a.kind == "clock"]
        taken += bool(clock) and clock[0].lead and (clock[0].replaces is not None or clock[0] is alarms[0])
    assert not_more_than(N_ALTERNATIVE - taken, N_ALTERNATIVE, 0.1)


@pytest.mark.slow
def test_a_late_step_is_found_after_long_good_behaviour():
    """0.5 sd at run 4,000 of 5,000: the median alarm by run 4,150."""
    found = alarms_of(BY_NAME["step of 0.5 sd at 4,000 of 5,000"], 24)
    assert not_more_than(sum(not a or a[0].index > 4150 for a in found), 24, 0.5)


@pytest.mark.slow
@pytest.mark.parametrize("size", [2.0, 3.0])
def test_a_large_step_is_called_drift(size):
    """A shift at one run is not taken for strong autocorrelation."""
    planted = frozenset({("drift", "order")})
    found = alarms_of(Scenario(name="large step", make=step(size), planted=planted, n_runs=400), 40)
    assert not_more_than(sum(alarms[0].key not in planted for alarms in found), 40, 0.12)


@pytest.mark.slow
def test_an_outcome_steered_campaign_alarms_within_the_budget_when_scored_by_stage():
    """Successive halving keeps good cells: declared stages hold the level that undeclared cells break."""
    by_stage = by_cell = 0
    n_campaigns = 60
    for seed in range(n_campaigns):
        landed = halving(np.random.default_rng([8, seed]))
        values, cells, stages = landed.y, landed.cell.astype(str), landed.stage.astype(str)
        by_stage += bool(replay(values, cells=cells_within_stages(cells, stages)).alarms)
        by_cell += bool(replay(values, cells=cells).alarms)
    assert not_more_than(by_stage, n_campaigns, BUDGET)
    assert by_cell > by_stage


@pytest.mark.slow
@pytest.mark.parametrize("scenario", DAEMON_NULLS, ids=lambda scenario: scenario.name)
def test_independent_runs_by_the_daemons_path_alarm_no_more_often_than_the_budget(scenario):
    """Three nuisances, automatic responses, order by start: any alarm within the binomial bound of 0.05."""
    hits = 0
    for number in range(N_DAEMON):
        alarms, audit = audited(scenario, [6, number])
        hits += bool(alarms)
        assert audit.n_scored() > 500
    assert not_more_than(hits, N_DAEMON, BUDGET)


@pytest.mark.slow
def test_a_host_step_is_found_by_the_daemons_path_too():
    """The same path sees what is there: 1.5 sd on one of five hosts from run 400 on, named, in 9 of 10."""

    def stepped(rng):
        landed = DAEMON_NULLS[0].make(rng)
        return replace(landed, y=landed.y + 1.5 * ((landed.host == 2) & (np.arange(landed.y.size) >= 400)))

    found = 0
    for number in range(10):
        alarms, _ = audited(DaemonScenario(name="host step", make=stepped), [7, number])
        first = alarms[0] if alarms else None
        found += first is not None and (first.response, first.alarm.level) == ("y", "n2")
    assert found >= 9


def test_runs_steered_by_outcome_without_stages_are_not_asked():
    """Every kind is withheld, so that no alarm can be raised, and the audit says which."""
    alarms, audit = audited(WITHHELD, [6, 0])
    assert not alarms
    assert not audit.tracks
    assert set(audit.withheld) == {"serial", "drift", "clock", "spread", "batch", "lineage"}


@pytest.mark.slow
@pytest.mark.parametrize("law", ["normal", "lognormal"])
def test_seed_blocks_hold_the_level(law):
    """Common random numbers (ρ = 0.5) declared: block means and contrasts, budget shared, hold 0.05."""
    hits, n_campaigns = 0, 80
    for seed in range(n_campaigns):
        rng = np.random.default_rng([9, seed])
        blocks, k = 200, 4
        draw = rng.normal if law == "normal" else rng.lognormal
        luck, own = draw(size=(blocks, 1)), draw(size=(blocks, k))
        values = (luck + own).ravel()
        order = np.concatenate([block * k + rng.permutation(k) for block in range(blocks)])
        found = seed_blocks(values[order], np.tile(list("abcd"), blocks)[order], (order // k).astype(str))
        host = rng.integers(4, size=values.size).astype(str)
        means = replay(
            found.mean,
            cells=["block"] * found.mean.size,
            nuisance={"host": host[found.mean_index]},
            n_responses=2,
        )
        contrasts = replay(
            found.contrast,
            cells=found.contrast_cells,
            nuisance={"host": host[found.contrast_index]},
            n_responses=2,
            response="contrast",
        )
        hits += bool(means.alarms or contrasts.alarms)
    assert not_more_than(hits, n_campaigns, BUDGET)


@pytest.mark.full
def test_the_complete_table():
    """Writes tests/calibration/tables/sequential.md."""
    import tables

    tables.sequential()
