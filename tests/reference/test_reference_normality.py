"""Tests of normality against published values."""

import numpy as np
import pytest
import statsmodels.api as sm
from statsmodels.stats.diagnostic import normal_ad

from auditd.stats import anderson_darling, shapiro_wilk

# Shapiro & Wilk (1965), Biometrika 52:591-611, Example 1: weights of eleven men.
WEIGHTS = (148, 154, 158, 160, 161, 162, 166, 170, 182, 195, 236)


def test_weights_of_eleven_men_typed_in():
    """W .7888147830963135, p .006703814061898823 (recalled figure of scipy's documentation, reproduced)."""
    result = shapiro_wilk(WEIGHTS)
    assert result.statistic == pytest.approx(0.7888147830963135, abs=9.3e-8)
    assert result.pvalue == pytest.approx(0.006703814061898823, abs=7.1e-12)


def test_weights_from_the_shared_copy(columns):
    """The same from the reference folder."""
    result = shapiro_wilk(columns("shapiro_weights11.csv", "x"))
    assert result.statistic == pytest.approx(0.7888147830963135, abs=9.3e-8)
    assert result.pvalue == pytest.approx(0.006703814061898823, abs=7.1e-12)


@pytest.mark.parametrize(
    ("column", "w", "p", "w_tolerance", "p_tolerance"),
    [
        ("x1", 0.90047287931756, 0.04208957522226, 9.5e-10, 2.5e-10),
        ("x2", 0.95902694603234, 0.5245979304707, 9.6e-10, 1.3e-9),
    ],
)
def test_values_of_r(columns, column, w, p, w_tolerance, p_tolerance):
    """R's shapiro.test to 16 digits, as kept in scipy's test suite (published)."""
    result = shapiro_wilk(columns("shapiro_x1x2.csv", column))
    assert result.statistic == pytest.approx(w, abs=w_tolerance)
    assert result.pvalue == pytest.approx(p, abs=p_tolerance)


def test_data_of_1965(columns):
    """Shapiro & Wilk's 25 values: W .83466627531817, p .000913490481813 (R's shapiro.test; published)."""
    result = shapiro_wilk(columns("shapiro_1965.csv", "x"))
    assert result.statistic == pytest.approx(0.83466627531817, abs=8.8e-10)
    assert result.pvalue == pytest.approx(0.000913490481813, abs=9.7e-13)


def test_heat_flow_by_shapiro_wilk(columns):
    """NIST Dataplot, Wilk-Shapiro test of ZARR13: W .9982718, p .9992256 (published, single precision)."""
    result = shapiro_wilk(columns("eh_zarr13.csv", "y"))
    assert result.statistic == pytest.approx(0.9982718, abs=4e-7)
    assert result.pvalue == pytest.approx(0.9992256, abs=1.4e-6)


def test_heat_flow_by_anderson_darling(columns):
    """NIST e-Handbook 1.4.2.8: A² .129 once multiplied by 1 + 4/n − 25/n² (recalled, reproduced)."""
    result = anderson_darling(columns("eh_zarr13.csv", "y"))
    n = result.n
    assert n == 195
    assert result.statistic * (1 + 4 / n - 25 / n**2) == pytest.approx(0.129, abs=0.00055)
    assert result.statistic == pytest.approx(0.126479, abs=5.5e-7)
    assert result.modified == pytest.approx(0.126973, abs=5.5e-7)


# R's nortest ad.test on residuals of an investment equation and on the first 20 of them (published in
# statsmodels' test suite): A², p, and how near.
NORTEST = (
    (None, 1.602209621518313, 0.0003937979149362316, 1.7e-9, 4.2e-13),
    (20, 0.3017073732210775, 0.5443499281265933, 3.2e-10, 5.8e-10),
)


@pytest.mark.parametrize(("first", "a2", "p", "a2_tolerance", "p_tolerance"), NORTEST)
def test_residuals_from_the_shared_copy(columns, first, a2, p, a2_tolerance, p_tolerance):
    """A² and p of R's ad.test on least-squares residuals of the reference folder's growth rates."""
    investment, product, interest = columns("macrodata_growth.csv", "g_realinv", "g_realgdp", "lag_realint")
    result = anderson_darling(_residuals(investment, product, interest)[:first])
    assert result.statistic == pytest.approx(a2, abs=a2_tolerance)
    assert result.pvalue == pytest.approx(p, abs=p_tolerance)


@pytest.mark.parametrize(("first", "a2", "p", "a2_tolerance", "p_tolerance"), NORTEST)
def test_residuals_of_macrodata(first, a2, p, a2_tolerance, p_tolerance):
    """The same from the data that statsmodels carries."""
    data = sm.datasets.macrodata.load_pandas().data
    investment = 400 * np.diff(np.log(data["realinv"].to_numpy()))
    product = 400 * np.diff(np.log(data["realgdp"].to_numpy()))
    result = anderson_darling(_residuals(investment, product, data["realint"].to_numpy()[:-1])[:first])
    assert result.statistic == pytest.approx(a2, abs=a2_tolerance)
    assert result.pvalue == pytest.approx(p, abs=p_tolerance)


def _residuals(y, *regressors):
    design = np.column_stack([np.ones(y.size), *regressors])
    return y - design @ np.linalg.lstsq(design, y, rcond=None)[0]


@pytest.mark.parametrize("sample", ["normal", "uniform", "exponential", "standard_cauchy"])
def test_agrees_with_statsmodels(sample):
    """statsmodels' normal_ad gives the same A² and p for four shapes, down to p of 4e-24."""
    x = getattr(np.random.default_rng(5), sample)(size=300)
    result = anderson_darling(x)
    a2, p = normal_ad(x)
    assert result.statistic == pytest.approx(a2, rel=1e-9)
    # There the fitted curve is held where it would turn upwards again; normal_ad follows it or gives 0.
    if result.modified < 10:
        assert result.pvalue == pytest.approx(p, rel=1e-7)
    else:
        assert result.pvalue == pytest.approx(3.7e-24, rel=0.01)


def test_false_alarms_of_anderson_darling():
    """2,000 normal samples of 30: the share of p ≤ .05 lies within binomial error of .05."""
    rng = np.random.default_rng(99)
    share = np.mean([anderson_darling(rng.normal(size=30)).pvalue <= 0.05 for _ in range(2000)])
    assert abs(share - 0.05) < 3 * (0.05 * 0.95 / 2000) ** 0.5
