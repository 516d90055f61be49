"""Checks of trends and changes of level: planted ones are found and dated, near misses are not."""

import numpy as np
import pytest
from series_made import series

from auditd.checks.drift_mann_kendall import N_KENDALL, DriftMannKendall
from auditd.checks.drift_pettitt import DriftPettitt
from auditd.checks.drift_selected_shift import DriftSelectedShift, selected_pvalue
from auditd.checks.full_audit import audit_series
from auditd.checks.view import whole
from auditd.stats import mann_kendall, pettitt


def finding(answers, check, along):
    (one,) = [one for one in answers if (one.check, one.along) == (check, along)]
    return one


def test_a_rise_is_found_with_its_size():
    """A rise of 1 sd over 400 runs is found; the effect's interval holds it."""
    rng = np.random.default_rng(1)
    found = DriftMannKendall().ask(whole(series(rng.normal(size=400) + np.linspace(0, 1, 400))))
    assert found.pvalue < 1e-3
    assert found.effect.low < 1 < found.effect.high


def test_few_runs_use_kendalls_count_and_many_a_statistic_that_agrees():
    """Up to the bound the statistic is Mann and Kendall's; beyond it is within a tenth of it."""
    x = np.random.default_rng(2).normal(size=N_KENDALL) + np.linspace(0, 0.5, N_KENDALL)
    assert DriftMannKendall().ask(whole(series(x))).statistic == pytest.approx(mann_kendall(x).statistic)
    y = np.random.default_rng(3).normal(size=2_000) + np.linspace(0, 0.5, 2_000)
    found = DriftMannKendall().ask(whole(series(y)))
    assert found.statistic == pytest.approx(mann_kendall(y).statistic, rel=0.1)
    assert "asymptotically equal" in found.reason


def test_a_step_is_dated_to_its_run():
    """A step of 1.5 sd at run 150 of 300 is found, and its run named within ten."""
    rng = np.random.default_rng(4)
    x = rng.normal(size=300) + 1.5 * (np.arange(300) >= 150)
    found = DriftPettitt().ask(whole(series(x)))
    assert found.pvalue < 1e-6
    assert found.statistic == pytest.approx(pettitt(x).statistic)
    assert abs(int(found.effect.name.split("run r")[1][:5]) - 150) <= 10
    assert found.effect.low < 1.5 < found.effect.high


def test_the_interval_of_a_shift_has_its_coverage():
    """A step of 1 sd in the middle of 300 runs is held by 95 % of 100 intervals (binomial 0.1 %)."""
    held = 0
    for seed in range(100):
        x = np.random.default_rng(seed).normal(size=300) + (np.arange(300) >= 150)
        effect = DriftPettitt().ask(whole(series(x))).effect
        held += effect.low < 1 < effect.high
    assert held >= 88


def test_a_step_of_one_host_is_named_by_host_and_run():
    """One of four hosts steps early in its life: the audit names the host, the run and the size."""
    rng = np.random.default_rng(5)
    host = np.arange(800) % 4
    x = rng.normal(size=800) + 2.0 * ((host == 2) & (np.arange(800) >= 60))
    answers, _ = audit_series(series(x, nuisance={"host": host}))
    found = finding(answers, "selected_shift", "host")
    assert found.verdict == "dependence"
    assert "host2" in found.effect.name
    assert abs(int(found.effect.name.split("run r")[1][:5]) - 60) <= 30
    assert found.effect.low > 1.4  # the split is chosen by the runs, which inflates what is small in number
    assert "1 of 4 levels" in found.reason


def test_rises_on_levels_that_cancel_are_found_within_levels():
    """One host rises, another falls: the whole order shows nothing, within hosts both are seen."""
    rng = np.random.default_rng(6)
    host = np.arange(600) % 2
    x = rng.normal(size=600) + np.linspace(-1, 1, 600) * np.where(host == 0, 1, -1)
    answers, _ = audit_series(series(x, nuisance={"host": host}))
    assert finding(answers, "mann_kendall", "order").verdict == "no evidence"
    assert finding(answers, "mann_kendall", "host").verdict == "dependence"


def test_a_change_of_cells_is_no_drift():
    """All runs of one cell before those of the other, a long way apart: nothing is found."""
    rng = np.random.default_rng(7)
    cells = np.repeat([0, 1], 150)
    answers, _ = audit_series(series(rng.normal(size=300) + 9 * cells, cells=cells))
    assert {one.verdict for one in answers if one.family == "dependence"} == {"no evidence"}


def test_trends_beside_serial_dependence_say_that_their_p_is_too_small():
    """A random walk has a trend and alike neighbours; the trend's remark says that they go together."""
    walk = np.cumsum(np.random.default_rng(8).normal(size=300))
    answers, _ = audit_series(series(walk))
    assert "neighbours are alike too" in finding(answers, "pettitt", "order").reason


def test_a_tiny_effect_at_a_huge_n_is_said_to_be_tiny():
    """A rise of 0.03 sd over 100,000 runs is certain; the finding says that it is tiny, by margin or sd."""
    rng = np.random.default_rng(9)
    x = rng.normal(size=100_000) + np.linspace(0, 0.05, 100_000)
    by_spread = finding(audit_series(series(x))[0], "mann_kendall", "order")
    assert by_spread.verdict == "dependence"
    assert "tiny" in by_spread.reason
    by_margin = finding(audit_series(series(x), margin=0.2)[0], "mann_kendall", "order")
    assert "margin of 0.2" in by_margin.reason
    small_margin = finding(audit_series(series(x), margin=0.001)[0], "mann_kendall", "order")
    assert "tiny" not in small_margin.reason


def test_the_selected_shift_keeps_its_level():
    """Of 1,000 exchangeable levels of 60 runs at most 5 % have p below 0.05, and some do."""
    rng = np.random.default_rng(10)
    found = [DriftSelectedShift().ask(whole(series(rng.normal(size=60)))).pvalue for _ in range(1_000)]
    assert 0.005 < np.mean(np.array(found) <= 0.05) <= 0.065


def test_the_selected_pvalue_is_the_published_approximation():
    """At b = 3 with splits from 0.1 to 0.9: 4φ/b + φ(b − 1/b)·2 ln 9 = 0.0580 (computed by hand)."""
    density = 0.00443185
    assert selected_pvalue(3.0, 0.1) == pytest.approx(
        4 * density / 3 + density * (3 - 1 / 3) * 2 * np.log(9), rel=1e-5
    )


def test_a_level_that_is_constant_does_not_stop_the_others():
    """One host gives one value for ever, another steps: the step is found."""
    rng = np.random.default_rng(11)
    host = np.arange(200) % 2
    x = np.where(host == 0, 0.0, rng.normal(size=200) + 3 * (np.arange(200) >= 100))
    answers, _ = audit_series(series(x, nuisance={"host": host}))
    assert finding(answers, "selected_shift", "host").verdict == "dependence"
