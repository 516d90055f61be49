"""Tests of cycles against published figures."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.optimize import brentq
from scipy.signal import lombscargle

from auditd.stats import fisher_g, lomb_scargle
from auditd.stats.fisher_g import exceedance

# Years, counted from 1, that R lomb's vignette leaves out.
LEFT_OUT = (5, 25, 49, 26, 56, 79, 88, 98, 99, 112)


@pytest.fixture
def lynx(shared_folder):
    """Canadian lynx 1821-1934, years and log10 of the numbers trapped."""
    d = pd.read_csv(shared_folder / "reference/data/lynx.csv")
    return d.year.to_numpy(dtype=float), np.log10(d.trappings.to_numpy(dtype=float))


def test_fishers_table():
    """From memory, reproduced: Fisher (1929), Proc. R. Soc. A 125:54, 5 % critical values of g."""
    table = {
        5: 0.68377, 10: 0.44495, 15: 0.33462, 20: 0.2704, 25: 0.22805,
        30: 0.19784, 35: 0.17513, 40: 0.15738, 45: 0.1431, 50: 0.13135,
    }  # fmt: skip
    for m, g in table.items():
        got = brentq(lambda value, m=m: exceedance(value, m) - 0.05, 1.2 / m, 1)
        assert got == pytest.approx(g, abs=2e-5)


def test_lynx_cycle(lynx):
    """Computed, no published figure: index 12 of 56 ordinates, a period of 9.5 years; p = 1.136e-20."""
    got = fisher_g(lynx[1])
    assert (got.index, got.n_ordinates, got.period) == (12, 56, 9.5)
    assert got.statistic == pytest.approx(0.5967383947357493, abs=1e-9)
    assert got.pvalue == pytest.approx(1.136e-20, rel=5e-4)


def test_even_sampling_gives_the_classical_periodogram(lynx):
    """Theory: Scargle (1982): at the Fourier frequencies of even sampling the two periodograms are equal."""
    years, x = lynx
    got = lomb_scargle(years, x)
    deviations = x - x.mean()
    classical = np.abs(np.fft.rfft(deviations)[1:57]) ** 2 / x.size
    at = np.searchsorted(got.frequencies, np.arange(1, 57) / x.size - 1e-9)
    assert got.frequencies[at] == pytest.approx(np.arange(1, 57) / x.size, rel=1e-12)
    ours = got.powers[at] * np.sum(deviations**2) / 2
    assert np.max(np.abs(ours / classical - 1)) < 1e-9


def test_lynx_with_gaps(shared_folder):
    """Published: R lomb vignette (Ruf): ten years left out, a peak at a period of about 10 years."""
    d = pd.read_csv(shared_folder / "reference/data/lynx.csv").drop(index=[year - 1 for year in LEFT_OUT])
    for x in (d.trappings, np.log10(d.trappings)):
        got = lomb_scargle(d.year, x)
        assert got.period == pytest.approx(10, abs=0.7)
        assert got.power > 0.55
        assert got.pvalue < 1e-12


def test_the_sunspot_cycle():
    """Common knowledge: the sunspots' cycle of about 11 years, in data that statsmodels carries."""
    d = sm.datasets.sunspots.load_pandas().data
    assert fisher_g(d.SUNACTIVITY).period == pytest.approx(11, abs=0.5)
    keep = np.random.default_rng(4).random(len(d)) < 0.7
    got = lomb_scargle(d.YEAR[keep], d.SUNACTIVITY[keep])
    assert got.period == pytest.approx(11, abs=0.5)


@pytest.mark.parametrize("n", [9, 60, 800])
def test_transform_equals_scipys_sums(n):
    """Cross-check: scipy.signal.lombscargle, which adds term by term."""
    rng = np.random.default_rng(n)
    times = np.sort(rng.uniform(5, 105, n))
    x = rng.standard_t(3, n)
    got = lomb_scargle(times, x)
    expected = lombscargle(times, x - x.mean(), 2 * np.pi * got.frequencies, normalize=True)
    assert got.powers == pytest.approx(expected, abs=1e-10)


def test_fishers_law_by_simulation():
    """Independent method: the share of 20,000 white series whose g is beyond the 5 and 50 % points."""
    rng = np.random.default_rng(8)
    spectra = np.abs(np.fft.rfft(rng.normal(size=(20_000, 41)))[:, 1:21]) ** 2
    g = spectra.max(axis=1) / spectra.sum(axis=1)
    for share in (0.05, 0.5, 0.95):
        limit = np.quantile(g, 1 - share)
        assert exceedance(float(limit), 20) == pytest.approx(share, abs=0.012)


def test_baluevs_bound_holds():
    """Theory: under white noise the bound is passed by at most its level (300 series, uneven times)."""
    rng = np.random.default_rng(9)
    p = np.array(
        [lomb_scargle(np.sort(rng.uniform(0, 1, 60)), rng.normal(size=60)).pvalue for _ in range(300)]
    )
    for level in (0.01, 0.05, 0.2):
        assert np.mean(p <= level) <= level + 3 * np.sqrt(level * (1 - level) / p.size)
    # The bound is sharp where it matters: most of the level is used.
    assert np.mean(p <= 0.2) >= 0.08
