"""Properties of the series functions: invariance, reversal, no mutation, agreement of two ways."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

import auditd.stats._sen_slope as sen
from auditd.errors import NotTestable
from auditd.stats import (
    autocorrelation,
    breusch_godfrey,
    cluster_covariance,
    cusum,
    durbin_watson,
    durbin_watson_bounds,
    ewma,
    fisher_g,
    integrated_time,
    ljung_box,
    lomb_scargle,
    mann_kendall,
    newey_west,
    pettitt,
    runs_test,
    von_neumann_rank,
)
from auditd.stats._inversions import count_inversions
from auditd.stats._quadratic_form import upper_tail

# Values on a grid of 1/64 with at most 15 bits: shifts and scales by powers of two are then exact.
GRID = st.integers(-(2**14), 2**14).map(lambda v: v / 64)
SERIES = arrays(np.float64, st.integers(12, 60), elements=GRID).filter(lambda x: np.unique(x).size > 6)
SHIFT = st.integers(-4096, 4096).map(float)
SCALE = st.sampled_from([2.0**-20, 0.25, 2.0, 2.0**30])

INVARIANT = (
    lambda x: autocorrelation(x, 3).r,
    lambda x: ljung_box(x, 4).statistic,
    lambda x: breusch_godfrey(x, np.ones((x.size, 1)), 2).statistic,
    lambda x: durbin_watson(x - x.mean(), np.ones((x.size, 1))).pvalue,
    lambda x: runs_test(x).statistic,
    lambda x: mann_kendall(x).statistic,
    lambda x: von_neumann_rank(x).pvalue,
    lambda x: pettitt(x).statistic,
    lambda x: fisher_g(x).statistic,
    lambda x: lomb_scargle(np.arange(x.size), x).power,
)


@pytest.mark.parametrize("function", INVARIANT)
@settings(max_examples=25, deadline=None)
@given(x=SERIES, shift=SHIFT, scale=SCALE)
def test_shift_and_scale_change_nothing(function, x, shift, scale):
    """A change of unit or of origin leaves every statistic of order and dependence as it is."""
    assert function(scale * (x + shift)) == pytest.approx(function(x), rel=1e-6, abs=1e-8)


@settings(max_examples=40, deadline=None)
@given(x=SERIES, scale=SCALE)
def test_sens_slope_follows_the_unit(x, scale):
    """Sen's slope and its limits are in the unit of the values over that of the times."""
    times = np.arange(x.size) * 0.5
    plain, scaled = mann_kendall(x, times), mann_kendall(scale * x, times)
    for name in ("slope", "slope_low", "slope_high"):
        assert getattr(scaled, name) == pytest.approx(
            scale * getattr(plain, name), rel=1e-9, abs=1e-12 * scale
        )
    assert plain.slope_low <= plain.slope <= plain.slope_high


@settings(max_examples=40, deadline=None)
@given(x=SERIES)
def test_reversal(x):
    """Backwards, trends change their sign and what has no direction stays."""
    back = x[::-1]
    assert mann_kendall(back).s == -mann_kendall(x).s
    assert von_neumann_rank(back).statistic == pytest.approx(von_neumann_rank(x).statistic, rel=1e-12)
    assert runs_test(back).n_runs == runs_test(x).n_runs
    assert autocorrelation(back, 5).r == pytest.approx(autocorrelation(x, 5).r, abs=1e-10)
    assert durbin_watson(back - x.mean(), np.ones((x.size, 1))).statistic == pytest.approx(
        durbin_watson(x - x.mean(), np.ones((x.size, 1))).statistic, rel=1e-9
    )


@settings(max_examples=40, deadline=None)
@given(x=SERIES)
def test_score_counts_every_pair(x):
    """Kendall's S in O(n log n) equals the plain count over all pairs, also with tied values and times."""
    times = np.sort(np.round(np.abs(x[::-1])) % 17)
    if times[0] == times[-1]:
        return
    plain = sum(
        np.sign(x[j] - x[i]) * np.sign(times[j] - times[i])
        for i in range(x.size)
        for j in range(i + 1, x.size)
    )
    assert mann_kendall(x, times).s == plain


@settings(max_examples=60, deadline=None)
@given(permutation=st.integers(1, 70).flatmap(lambda n: st.permutations(range(n))))
def test_inversions_are_counted(permutation):
    """The bitwise count of inversions equals the plain count over all pairs."""
    p = np.array(permutation)
    plain = sum(int(p[i] > p[j]) for i in range(p.size) for j in range(i + 1, p.size))
    assert count_inversions(p) == plain


@pytest.mark.parametrize("shape", ["smooth", "coarse", "trend", "heavy", "uneven"])
def test_searched_slopes_equal_sorted_ones(shape, monkeypatch):
    """Above 2,000 values Sen's slopes are searched for; they agree with the sorted ones."""
    rng = np.random.default_rng(12)
    n = 1500
    times = np.sort(rng.exponential(size=n)) if shape == "uneven" else np.arange(float(n))
    x = rng.standard_cauchy(n) if shape == "heavy" else rng.normal(size=n)
    x = np.round(x) if shape == "coarse" else x + (0.01 * times if shape == "trend" else 0)
    exact = mann_kendall(x, times)
    monkeypatch.setattr(sen, "N_DIRECT_MAX", 10)
    found = mann_kendall(x, times)
    error = (exact.slope_high - exact.slope_low) / (2 * 1.96)
    for name in ("slope", "slope_low", "slope_high"):
        assert getattr(found, name) == pytest.approx(getattr(exact, name), abs=2e-3 * error + 1e-12)


@settings(max_examples=60, deadline=None)
@given(
    weights=arrays(
        np.float64, st.integers(2, 40), elements=st.floats(-4, 4).map(lambda w: round(w, 3))
    ).filter(lambda w: w.max() > 0 > w.min())
)
def test_tails_of_a_quadratic_form_add_up(weights):
    """The upper tail of a form and that of its negative are complements."""
    assert upper_tail(weights) + upper_tail(-weights) == pytest.approx(1.0, abs=1e-11)
    assert upper_tail(3.0 * weights) == pytest.approx(upper_tail(weights), rel=1e-9)


@settings(max_examples=30, deadline=None)
@given(n=st.integers(6, 60), k=st.integers(1, 3), seed=st.integers(0, 1000))
def test_bounds_enclose_every_design(n, k, seed):
    """At d_L the exact p of any design is at most the level, at d_U at least."""
    if n < k + 3:
        return
    rng = np.random.default_rng(seed)
    design = np.column_stack([np.ones(n), rng.normal(size=(n, k))])
    low, high = durbin_watson_bounds(n, k, 0.05)
    assert 0.0 < low < high < 4.0
    got = durbin_watson(rng.normal(size=n), design)
    if got.statistic <= low:
        assert got.pvalue <= 0.05 + 1e-8
    if got.statistic >= high:
        assert got.pvalue >= 0.05 - 1e-8


@settings(max_examples=40, deadline=None)
@given(x=SERIES, k=st.floats(0, 2), h=st.floats(0.5, 8))
def test_charts_equal_their_recursions(x, k, h):
    """CUSUM and EWMA without a loop equal the textbook recursions run by run."""
    z = x / 100
    got, averages = cusum(x, 0, 100, k, h), ewma(x, 0, 100, 0.3, 3)
    upper = lower = average = 0.0
    for i in range(x.size):
        upper, lower = max(0, upper + z[i] - k), max(0, lower - z[i] - k)
        average = 0.3 * x[i] + 0.7 * average
        assert got.path[i] == pytest.approx((upper, lower), abs=1e-9)
        assert averages.path[i] == pytest.approx(average, abs=1e-9)
    over = np.flatnonzero(got.path.max(axis=1) > h)
    assert got.alarm_index == (int(over[0]) if over.size else None)


@settings(max_examples=30, deadline=None)
@given(x=SERIES)
def test_covariances_are_covariances(x):
    """Both sandwiches are symmetric, positive semi-definite, and blind to the order of group names."""
    design = np.column_stack([np.ones(x.size), np.arange(x.size)])
    groups = np.arange(x.size) % 5
    for got in (newey_west(x, design, 3), cluster_covariance(x, design, groups)):
        assert np.array_equal(got, got.T)
        assert np.linalg.eigvalsh(got)[0] >= -1e-9 * np.abs(got).max()
    renamed = np.array(["q", "c", "z", "a", "m"])[groups]
    assert cluster_covariance(x, design, renamed) == pytest.approx(
        cluster_covariance(x, design, groups), rel=1e-9
    )
    order = np.random.default_rng(0).permutation(x.size)
    shuffled = cluster_covariance(x[order], design[order], groups[order])
    assert shuffled == pytest.approx(cluster_covariance(x, design, groups), rel=1e-7)


@settings(max_examples=25, deadline=None)
@given(x=SERIES)
def test_arguments_are_left_alone(x):
    """No function changes what it was given: read-only arrays pass and keep their bytes."""
    times, design = np.arange(float(x.size)), np.ones((x.size, 1))
    before = x.tobytes()
    for array in (x, times, design):
        array.flags.writeable = False
    calls = [*INVARIANT, lambda v: mann_kendall(v, times, "hamed-rao"), lambda v: cusum(v, 0, 1, 0.5, 5)]
    calls += [lambda v: ewma(v, 0, 1, 0.2, 3), integrated_time, lambda v: newey_west(v, design, 2)]
    calls += [lambda v: cluster_covariance(v, design, times), lambda v: lomb_scargle(times, v)]
    for call in calls:
        try:
            call(x)
        except NotTestable:
            continue
    assert x.tobytes() == before
