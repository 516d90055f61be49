"""Sums of wealths in logarithms against the recursions that define them."""

import numpy as np
import pytest

from auditd.sequential.earlier_counts import count_earlier
from auditd.sequential.latest_sum import log_sum_of_latest
from auditd.sequential.levels import LevelCodes, group
from auditd.sequential.levels_alone import LevelsAlone
from auditd.sequential.recurrence import solve_recurrence
from auditd.sequential.start_weights import log_start_weight, log_unstarted
from auditd.sequential.wealth import StartMixture, grow_wealth


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


@pytest.mark.parametrize("n_levels", [1, 5, 120])
def test_masses_are_spent_once_whatever_the_levels(n_levels):
    """Bets that neither win nor lose (L = 1) leave every family at exactly 1, over order and levels."""
    rng = np.random.default_rng(4)
    families = (("serial", 2), ("drift", 3))
    joint, alone = StartMixture(families), LevelsAlone(families)
    earlier = np.zeros(0, dtype=np.int64)
    codes = LevelCodes()
    for begin in (0, 1, 40, 300):
        n = {0: 1, 1: 39, 40: 260, 300: 500}[begin]
        code = codes.encode([str(level) for level in rng.integers(n_levels, size=n)])
        earlier = np.append(earlier, np.zeros(len(codes) - earlier.size, dtype=np.int64))
        count = np.arange(begin + 1, begin + n + 1)
        np.testing.assert_allclose(joint.follow(np.zeros((5, n)), count), 0.0, atol=1e-12)
        followed = alone.follow(np.zeros((5, n)), count, group(code, earlier))
        np.testing.assert_allclose(followed, 0.0, atol=1e-12)
        earlier = earlier + np.bincount(code, minlength=earlier.size)


def test_one_level_alone_wins_with_its_own_runs_only():
    """Level 1's bets double each run: the family's wealth is that level's, and it is the level named."""
    alone = LevelsAlone((("drift", 1),))
    code = np.array([0, 1, 0, 1, 1, 0])
    log_l = np.log(np.where(code == 1, 2.0, 1.0))[None, :]
    alone.follow(log_l, np.arange(1, 7), group(code, np.zeros(2, dtype=np.int64)))
    wealth = alone.level_log_wealth(0, 5)
    assert int(np.argmax(wealth)) == 1
    start = np.exp(log_start_weight(np.arange(1, 7)))
    expected = 8 * (0.25 / 6 + 0.75 * start[1]) + 4 * 0.75 * start[3] + 2 * 0.75 * start[4]
    assert np.exp(wealth[1]) == pytest.approx(expected, rel=1e-12)
