"""Sums of wealths in logarithms against the recursions that define them."""

import numpy as np
import pytest

from auditd.sequential.earlier_counts import count_earlier
from auditd.sequential.latest_sum import log_sum_of_latest
from auditd.sequential.recurrence import solve_recurrence
from auditd.sequential.start_weights import log_start_weight, log_unstarted
from auditd.sequential.wealth import grow_wealth


@pytest.mark.parametrize("scale", [0.1, 3.0, 80.0])
def test_wealth_follows_its_recursion_also_where_plain_numbers_would_overflow(scale):
    """S_t = (S_{t−1} + π_t)·L_t run by run in logarithms, with L up to e^±200 a run."""
    rng = np.random.default_rng(1)
    log_l = rng.normal(size=(3, 700)) * scale
    start, late = log_start_weight(np.arange(1, 701)), np.log([[0.5], [0.2], [0.75]])
    state = np.log([0.5, 0.8, 0.25])
    got = grow_wealth(state, log_l, start, late)
    for t in range(700):
        state = np.logaddexp(state, start[t] + late[:, 0]) + log_l[:, t]
        np.testing.assert_allclose(got[:, t], state, atol=1e-9)


def test_recurrences_with_segments_equal_a_loop():
    """Zero coefficients begin segments; quick and slow memories side by side."""
    rng = np.random.default_rng(2)
    c, d = np.tile([[0.02], [0.6], [0.9999]], (1, 300)), rng.normal(size=(3, 300))
    c[:, [0, 37, 200]] = 0.0
    expected = np.zeros((3, 300))
    for t in range(300):
        expected[:, t] = c[:, t] * (expected[:, t - 1] if t else 0.0) + d[:, t]
    np.testing.assert_allclose(solve_recurrence(c.copy(), d.copy()), expected, atol=1e-11)


@pytest.mark.parametrize("n_levels", [3, 150])
def test_the_sum_of_latest_values_equals_a_loop(n_levels):
    """Few levels at once and many in slices, levels without a value counting nothing."""
    rng = np.random.default_rng(3)
    code, value = rng.integers(n_levels, size=400), rng.normal(size=400) * 30
    latest = np.full(n_levels, -np.inf)
    latest[0] = 1.0
    held, expected = latest.copy(), []
    for level, new in zip(code, value, strict=True):
        held[level] = new
        expected.append(np.logaddexp.reduce(held))
    np.testing.assert_allclose(log_sum_of_latest(code, value, latest), expected, atol=1e-10)
    np.testing.assert_array_equal(latest, held)


@pytest.mark.parametrize("n", [1, 2, 3, 64, 257])
def test_counts_of_earlier_runs_equal_a_loop(n):
    """Smaller and equal ones of the same cell, with ties."""
    rng = np.random.default_rng(n)
    values, cells = np.round(rng.normal(size=n), 1), rng.integers(3, size=n)
    smaller, equal = count_earlier(values, cells)
    for t in range(n):
        mine = values[:t][cells[:t] == cells[t]]
        assert (smaller[t], equal[t]) == ((mine < values[t]).sum(), (mine == values[t]).sum())


def test_start_weights_and_what_has_not_started_sum_to_one():
    """The unstarted mass is what the weights have not spent, also across the table's growth."""
    count = np.arange(1, 3001)
    spent = np.cumsum(np.exp(log_start_weight(count)))
    np.testing.assert_allclose(np.exp(log_unstarted(count)), 1.0 - spent, atol=1e-12)
