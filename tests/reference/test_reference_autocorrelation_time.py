"""Integrated autocorrelation times against published figures and theory."""

import emcee
import numpy as np
import pandas as pd
import pytest
from scipy.signal import lfilter

from auditd.stats import integrated_time

COLUMNS = ("d", "sigmasq_delta", "mu1", "mu2")


def autoregression(phi, n, seed):
    """A stationary Gaussian AR(1) series."""
    rng = np.random.default_rng(seed)
    shocks = rng.normal(size=n)
    shocks[0] /= np.sqrt(1 - phi * phi)
    return lfilter([1.0], [1.0, -phi], shocks)


def test_effective_sizes_of_stan(shared_folder):
    """Published: stan-dev/stan compute_effective_sample_size_test.cpp, 1,000 draws, same estimator."""
    d = pd.read_csv(shared_folder / "reference/data/stan_blocker1.csv")
    got = [integrated_time(d[name]).n_effective for name in COLUMNS]
    assert got == pytest.approx([284.772, 105.681, 668.691, 569.402], abs=5.5e-4)


def test_times_of_emcee(shared_folder):
    """Computed by emcee 3.1.6, Sokal's window c = 5, no published figure."""
    d = pd.read_csv(shared_folder / "reference/data/stan_blocker1.csv")
    got = [integrated_time(d[name], method="sokal").tau for name in COLUMNS]
    assert got == pytest.approx(
        [2.722574366047082, 11.776103660254948, 1.3337571681557678, 1.7908294494024135], rel=1e-9
    )


def test_sokal_window_equals_emcee():
    """Cross-check: emcee.autocorr.integrated_time on simulated series."""
    for phi in (0.0, 0.5, 0.95):
        x = autoregression(phi, 20_000, 3)
        expected = float(emcee.autocorr.integrated_time(x, c=5)[0])
        assert integrated_time(x, method="sokal").tau == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    ("phi", "tau"),
    [(0.0, 1.0), (0.3, 1.8571428571428574), (0.5, 3.0), (0.9, 19.0), (-0.5, 1 / 3)],
)
def test_autoregressions(phi, tau):
    """Theory: an AR(1) has tau (1 + phi) / (1 − phi) (Priestley 1981; Sokal 1997); 400,000 values."""
    got = integrated_time(autoregression(phi, 400_000, 7))
    assert got.tau == pytest.approx(tau, rel=0.1)
    assert got.n_effective == pytest.approx(400_000 / got.tau, rel=1e-12)


def test_limits_cover_theory():
    """Theory: Sokal's limits hold tau of an AR(1) of 0.7 in at least 0.9 of 300 series of 2,000 values."""
    results = [integrated_time(autoregression(0.7, 2_000, seed)) for seed in range(300)]
    covered = np.mean([r.low <= 1.7 / 0.3 <= r.high for r in results])
    assert covered >= 0.9
