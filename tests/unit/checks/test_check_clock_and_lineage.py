"""Checks of the time of day and of parents: planted ones are found, look-alikes are not."""

import numpy as np
from series_made import BEGAN, series

from auditd.checks.clock_daily_cycle import ClockDailyCycle
from auditd.checks.full_audit import audit_series
from auditd.checks.view import whole

DAY_S = 86_400.0


def finding(answers, check, along):
    (one,) = [one for one in answers if (one.check, one.along) == (check, along)]
    return one


def times(n, days, seed):
    return BEGAN + np.sort(np.random.default_rng(seed).uniform(0, days * DAY_S, n))


def test_a_cycle_is_found_and_its_interval_has_its_coverage():
    """A sine of 0.5 sd over 30 days of 600 runs is found, and held by 95 % of 100 intervals (binomial)."""
    held = 0
    for seed in range(100):
        at = times(600, 30, seed)
        x = np.random.default_rng(seed).normal(size=600) + 0.5 * np.sin(2 * np.pi * at / DAY_S + 1)
        found = ClockDailyCycle().ask(whole(series(x, started=at)))
        assert found.pvalue < 0.01
        held += found.effect.low < 0.5 < found.effect.high
    assert held >= 88


def test_a_cycle_on_one_host_is_said_of_that_host():
    """One of three hosts follows the day: the level is named."""
    at = times(900, 30, 2)
    host = np.arange(900) % 3
    x = np.random.default_rng(2).normal(size=900) + 1.0 * np.sin(2 * np.pi * at / DAY_S) * (host == 1)
    found = finding(audit_series(series(x, started=at, nuisance={"host": host}))[0], "daily_cycle", "host")
    assert found.verdict == "dependence"
    assert found.effect.name.endswith("host1")


def test_a_slow_drift_is_no_cycle():
    """A random walk over 40 days leaves the cycle unsaid in at least 16 of 20 campaigns."""
    clean = 0
    for seed in range(20):
        at = times(800, 40, seed)
        walk = np.cumsum(np.random.default_rng(seed).normal(0, 0.1, 800))
        clean += finding(audit_series(series(walk, started=at))[0], "daily_cycle", "order").pvalue > 0.05
    assert clean >= 16


def test_two_days_and_one_hour_are_not_testable():
    """Two days cannot show a cycle; neither can runs that all start at the same hour."""
    x = np.random.default_rng(3).normal(size=200)
    two = finding(audit_series(series(x, started=times(200, 2, 3)))[0], "daily_cycle", "order")
    assert two.verdict == "not testable"
    assert "3 days" in two.reason
    noon = BEGAN + DAY_S * np.repeat(np.arange(40), 5)
    same = finding(audit_series(series(x, started=noon))[0], "daily_cycle", "order")
    assert same.verdict == "not testable"


def test_runs_without_a_start_are_told():
    """Some starts missing: not testable, with the reason."""
    at = times(100, 10, 4)
    at[7] = np.nan
    x = np.random.default_rng(4).normal(size=100)
    found = finding(audit_series(series(x, started=at))[0], "daily_cycle", "order")
    assert found.verdict == "not testable"
    assert "start" in found.reason


def test_inherited_results_are_found_and_others_not():
    """Children that take over 0.6 of their parent's deviation are found; unrelated ones are not."""
    rng = np.random.default_rng(5)
    parents = np.where(np.arange(300) >= 150, np.arange(300) - 150, -1)
    x = rng.normal(size=300)
    unrelated = finding(audit_series(series(x, parents=parents))[0], "parent_correlation", "order")
    assert unrelated.verdict == "no evidence"
    x[150:] = 0.6 * x[:150] + 0.8 * rng.normal(size=150)
    found = finding(audit_series(series(x, parents=parents))[0], "parent_correlation", "order")
    assert found.verdict == "dependence"
    assert found.effect.low < 0.6 < found.effect.high
    assert found.n == 150


def test_few_parents_are_not_testable():
    """Nine children are too few, and the answer says how many are needed."""
    parents = np.full(100, -1)
    parents[91:] = np.arange(9)
    x = np.random.default_rng(6).normal(size=100)
    found = finding(audit_series(series(x, parents=parents))[0], "parent_correlation", "order")
    assert found.verdict == "not testable"
    assert "needs 10" in found.reason
