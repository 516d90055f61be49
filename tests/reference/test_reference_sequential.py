"""The sequential audit against sources outside the project."""

import numpy as np
import pytest
from scipy import stats

from auditd.sequential import replay
from auditd.sequential.bets_batch import BatchEffects
from auditd.sequential.bets_clock import LEVEL_VARIANCE, ClockCycle
from auditd.sequential.bets_lineage import ParentCorrelation
from auditd.sequential.bets_spread import SpreadChange
from auditd.sequential.grids import BATCH_SHARE, CLOCK_VARIANCE, LINEAGE_PHI, SPREAD_SCALE, START_NORM
from auditd.sequential.latent_ar1 import N_STEPS_TO_STEADY, SignalState, gain_table, log_bets
from auditd.sequential.levels import group
from auditd.sequential.scored_block import ScoredBlock
from auditd.sequential.uniform import uniforms


def scored(z, *, code=None, times=None, parent_z=None):
    n = z.size
    code = np.zeros(n, dtype=np.int64) if code is None else code
    parent = np.full(n, np.nan) if parent_z is None else parent_z
    return ScoredBlock(
        z=z,
        reliability=np.ones(n),
        count=np.arange(1, n + 1),
        times=np.full(n, np.nan) if times is None else times,
        parent_z=parent,
        parent_reliability=np.isfinite(parent).astype(float),
        groups={"host": group(code, np.zeros(code.max() + 1, dtype=np.int64))},
    )


@pytest.mark.parametrize("decimals", [None, 1, 0])
def test_scores_equal_a_direct_count_of_earlier_runs(decimals):
    """Smoothed ranks by the definition, O(n²), also with ties (Vovk et al. 2005, section 2.2)."""
    rng = np.random.default_rng(3)
    n = 700
    y = rng.normal(size=n)
    y = y if decimals is None else np.round(y, decimals)
    y[::41] = np.nan
    cells = rng.integers(5, size=n).astype(str)
    u = uniforms([str(i) for i in range(n)], response="", key=b"k")
    expected = np.full(n, np.nan)
    for t in range(n):
        earlier = [y[i] for i in range(t) if cells[i] == cells[t] and np.isfinite(y[i])]
        if earlier and np.isfinite(y[t]):
            smaller = sum(value < y[t] for value in earlier)
            equal = sum(value == y[t] for value in earlier)
            expected[t] = stats.norm.ppf((smaller + u[t] * (1 + equal)) / (len(earlier) + 1))
    np.testing.assert_allclose(replay(y, cells=cells, key=b"k").scores, expected, atol=1e-12)


@pytest.mark.parametrize(("phi", "share"), [(0.6, 1.0), (-0.4, 0.5), (0.97, 0.1), (0.997, 0.03)])
def test_predictions_equal_statsmodels_state_space_filter(phi, share):
    """AR(1) plus noise against statsmodels' exact Kalman filter (SARIMAX with measurement error)."""
    from statsmodels.tsa.statespace.sarimax import SARIMAX

    z = np.random.default_rng(5).normal(size=400)
    model = SARIMAX(z, order=(1, 0, 0), measurement_error=True, trend="n")
    model.ssm.tolerance = 0.0  # no shortcut to the steady state: the exact filter throughout
    noise = max(1.0 - share, 1e-300)
    reference = model.filter([phi, noise, share * (1.0 - phi**2)])
    expected = reference.llf_obs - stats.norm.logpdf(z)
    state = SignalState(mean=np.zeros((1, 1)), trust=np.ones((1, 1)))
    got, _ = log_bets(
        gain_table((((phi,), (share,)),)),
        z,
        np.ones(z.size),
        np.arange(z.size),
        np.zeros(1, dtype=int),
        state,
    )
    np.testing.assert_allclose(got[0], expected, atol=1e-9)


def test_gains_are_steady_where_the_table_ends():
    """Beyond the table's end no gain moves: the last two columns agree to the last digits."""
    from auditd.sequential.bets_signal import ALONG_ORDER, WITHIN_LEVELS

    for grid in (*ALONG_ORDER.values(), *WITHIN_LEVELS.values()):
        table = gain_table((grid,))
        assert table.carry.shape[1] == N_STEPS_TO_STEADY
        np.testing.assert_allclose(table.carry[:, -1], table.carry[:, -2], rtol=0, atol=1e-15)
        np.testing.assert_allclose(table.variance[:, -1], table.variance[:, -2], rtol=0, atol=1e-15)


def test_batch_bets_are_the_conditional_densities_of_a_multivariate_normal():
    """Two levels' random effects: a multivariate normal conditioned run by run, the slow level taken off."""
    rng = np.random.default_rng(6)
    z, code = rng.normal(size=12), np.tile([0, 1, 1], 4)
    bets = BatchEffects("host")
    got = bets.log_bets(scored(z, code=code))
    fed = z - np.array([np.average(z[: t + 1], weights=0.995 ** np.arange(t, -1, -1)) for t in range(z.size)])
    for row, s in enumerate(BATCH_SHARE):
        for t in range(z.size):
            earlier = np.flatnonzero(code[:t] == code[t])
            m = earlier.size
            joint = s * np.ones((m + 1, m + 1)) + (1 - s) * np.eye(m + 1)
            weights = np.linalg.solve(joint[:m, :m], joint[:m, m]) if m else np.zeros(0)
            mean, variance = weights @ fed[earlier], joint[m, m] - weights @ joint[:m, m]
            expected = stats.norm.logpdf(z[t], mean, np.sqrt(variance)) - stats.norm.logpdf(z[t])
            assert got[row, t] == pytest.approx(expected, abs=1e-9)


def test_clock_bets_are_the_conditional_means_of_a_multivariate_normal():
    """Level, sine and cosine with normal priors: the cycle conditioned run by run, bet on by scipy."""
    rng = np.random.default_rng(7)
    n, day = 80, 86_400.0
    times = np.arange(n) * day * 4.0 / n
    z = rng.normal(size=n)
    got = ClockCycle().log_bets(scored(z, times=times))
    x = np.column_stack((np.sin(2 * np.pi * times / day), np.cos(2 * np.pi * times / day)))
    for row, v in enumerate(CLOCK_VARIANCE):
        cycle = v * x @ x.T
        seen = cycle + LEVEL_VARIANCE + (1 - v) * np.eye(n)
        mean = [cycle[t, :t] @ np.linalg.solve(seen[:t, :t], z[:t]) if t else 0.0 for t in range(n)]
        expected = stats.norm.logpdf(z, mean, 1.0) - stats.norm.logpdf(z)
        expected[times < 3 * day] = 0.0
        np.testing.assert_allclose(got[row], expected, atol=1e-9)
    assert not got[len(CLOCK_VARIANCE) :].any()  # four days are no three weeks


def test_spread_and_lineage_bets_are_scipy_densities():
    """N(0, κ²) and N(φ·parent, 1 − φ²) by scipy.stats.norm."""
    rng = np.random.default_rng(8)
    z, parent = rng.normal(size=50), rng.normal(size=50)
    parent[::3] = np.nan
    null = stats.norm.logpdf(z)
    got = SpreadChange().log_bets(scored(z))
    for row, kappa in enumerate(SPREAD_SCALE):
        np.testing.assert_allclose(got[row], stats.norm.logpdf(z, 0, kappa) - null, atol=1e-12)
    got = ParentCorrelation().log_bets(scored(z, parent_z=parent))
    for row, phi in enumerate(LINEAGE_PHI):
        expected = stats.norm.logpdf(z, phi * np.nan_to_num(parent), np.sqrt(1 - phi**2)) - null
        np.testing.assert_allclose(got[row], np.where(np.isnan(parent), 0.0, expected), atol=1e-12)


def test_every_bet_is_a_density_also_with_unreliable_scores():
    """exp(log L) times the normal density integrates to 1 over the next score (Gauss–Hermite)."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(80)
    weights = weights / weights.sum()
    rng = np.random.default_rng(9)
    past = rng.normal(size=9)
    rho = rng.uniform(0.2, 1.0, size=10)
    table = gain_table((((0.6, -0.4, 0.97), (0.5, 1.0)),))
    total = np.zeros(6)
    for node, weight in zip(nodes, weights, strict=True):
        state = SignalState(mean=np.zeros((6, 1)), trust=np.ones((6, 1)))
        log_l, _ = log_bets(table, np.append(past, node), rho, np.arange(10), np.zeros(1, dtype=int), state)
        total += weight * np.exp(log_l[:, -1])
    np.testing.assert_allclose(total, 1.0, atol=1e-6)


def test_the_start_weights_sum_to_no_more_than_one():
    """Σ 1/((t+1) ln²(t+2)), t ≥ 1, by summation and the integral test, is below the constant dividing it."""
    t = np.arange(1.0, 2e6)
    partial = np.sum(1.0 / ((t + 1) * np.log(t + 2) ** 2))
    upper = partial + 1.0 / np.log(2e6)  # ∫ dx/(x ln² x) from 2e6 on bounds what is left
    assert upper <= START_NORM
    assert upper > 0.999 * START_NORM


def test_ville_bounds_the_largest_e_value_of_exchangeable_runs():
    """Ville (1939): the mean ever reaches 1/α with probability at most α (binomial bound, seeded)."""
    reached = 0
    campaigns, alpha = 300, 0.2
    for seed in range(campaigns):
        rng = np.random.default_rng([41, seed])
        cells, host = rng.integers(3, size=250).astype(str), rng.integers(3, size=250).astype(str)
        found = replay(rng.standard_t(3, size=250), cells=cells, nuisance={"host": host}, alarm_budget=alpha)
        reached += bool(found.alarms)
    assert stats.binom.sf(reached - 1, campaigns, alpha) > 1e-3
