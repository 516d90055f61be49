"""Durbin-Watson statistics, exact p-values and bounds against published figures."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.stats import f as f_law
from scipy.stats import norm

from auditd.stats import durbin_watson, durbin_watson_bounds
from auditd.stats._quadratic_form import upper_tail
from auditd.stats.durbin_watson import moments, path_eigenvalues


def least_squares(y, *regressors):
    """Residuals of y on a constant and the regressors, and the design."""
    design = np.column_stack([np.ones(len(y)), *regressors])
    y = np.asarray(y, dtype=float)
    return y - design @ np.linalg.lstsq(design, y, rcond=None)[0], design


def test_bond_yield_models_of_kraemer_and_sonnberger(shared_folder):
    """Published: Krämer & Sonnberger (1986), Table 6.5; exact p from lmtest 0.9-40, lmtest-Ex.Rout.save."""
    d = pd.read_csv(shared_folder / "reference/data/lmtest_bondyield.csv")
    first = durbin_watson(*least_squares(d.RAARUS, d.MOOD, d.EPI, d.EXP, d.RUS))
    assert first.statistic == pytest.approx(0.84484, abs=5.8e-6)
    assert first.pvalue == pytest.approx(2.888e-08, rel=5e-4)
    second = durbin_watson(*least_squares(d.RAARUS, d.MOOD, d.Y, d.K))
    assert second.statistic == pytest.approx(1.4387, abs=5.8e-5)
    assert second.pvalue == pytest.approx(0.004938, abs=5.5e-7)


def test_currency_substitution_deep_tail(shared_folder):
    """Published: Krämer & Sonnberger (1986), Table 6.3, lmtest; p in 40 digits computed for this project."""
    d = pd.read_csv(shared_folder / "reference/data/lmtest_currencysubstitution.csv")
    bordo = durbin_watson(*least_squares(d.logCUS, d.Iu - d.Ic, d.Ic, d.logY))
    assert bordo.statistic == pytest.approx(0.53514, abs=5.8e-6)
    assert bordo.pvalue == pytest.approx(2.261e-13, rel=5e-4)
    assert bordo.pvalue == pytest.approx(2.2611877587e-13, rel=1e-9)
    miles = durbin_watson(*least_squares(d.logCUS, np.log((1 + d.Iu) / (1 + d.Ic))))
    assert miles.statistic == pytest.approx(0.27024, abs=5.8e-6)
    assert miles.pvalue == pytest.approx(6.4395e-21, rel=1e-4)


def test_simulated_examples_of_lmtest(shared_folder):
    """d published (lmtest examples bgtest, dwtest); exact p computed (lmtest has a normal one there)."""
    d = pd.read_csv(shared_folder / "reference/data/lmtest_bgtest_sim.csv")
    first = durbin_watson(*least_squares(d.y1, d.x))
    assert first.statistic == pytest.approx(1.9762, abs=5.8e-5)
    assert first.pvalue == pytest.approx(0.49271501943631624, abs=5.2e-10)
    assert first.method == "exact"
    _, design = least_squares(d.y1, d.x)
    mean, variance = moments(100, np.linalg.qr(design)[0])
    z = (first.statistic - mean) / np.sqrt(variance)
    # Published: lmtest's normal approximation with the exact moments.
    assert norm.cdf(z) == pytest.approx(0.4924, abs=5.8e-5)
    d = pd.read_csv(shared_folder / "reference/data/lmtest_dwtest_sim.csv")
    second = durbin_watson(*least_squares(d.y, d.x))
    assert second.statistic == pytest.approx(0.45961, abs=5.8e-6)
    assert second.pvalue == pytest.approx(2.5593e-21, rel=1e-4)


def test_hypothesistests_jl_to_24_decimals(shared_folder):
    """Published: JuliaStats/HypothesisTests.jl, test/durbin_watson.jl (n = 101, p = 1.8e-24)."""
    d = pd.read_csv(shared_folder / "reference/data/hypothesistests_dw_pos.csv")
    got = durbin_watson(*least_squares(d.y, d.x))
    assert got.statistic == pytest.approx(0.40499929824035813, rel=1e-12)
    assert got.pvalue == pytest.approx(1.8497207710325893e-24, rel=1e-9)


def test_bounds_significance_of_nag():
    """Published: NAG routine g01ep, documented example (n = 10, mean and one regressor, d = 0.9238)."""
    roots = path_eigenvalues(10)
    assert upper_tail(0.9238 - roots[1:9]) == pytest.approx(0.061, abs=5.5e-4)
    assert upper_tail(0.9238 - roots[2:]) == pytest.approx(0.006, abs=5.5e-4)


@pytest.mark.parametrize(
    ("n", "k", "low", "high"),
    [
        (15, 1, 1.08, 1.36), (15, 5, 0.56, 2.22), (20, 3, 1.00, 1.68), (25, 2, 1.21, 1.55),
        (30, 4, 1.14, 1.74), (40, 5, 1.23, 1.79), (55, 1, 1.53, 1.60), (60, 3, 1.48, 1.69),
        (75, 2, 1.57, 1.68), (100, 5, 1.57, 1.78),
    ],
)  # fmt: skip
def test_bounds_at_five_percent_as_every_textbook_prints_them(n, k, low, high):
    """Durbin & Watson (1951), Table 4; Savin & White (1977), two decimals (15, 5: d_U corrected)."""
    got = durbin_watson_bounds(n, k, 0.05)
    assert got == pytest.approx((low, high), abs=0.0051)


@pytest.mark.parametrize(
    ("name", "level", "misprint"),
    [("data/dw_bounds_5pct.csv", 0.05, 0.0106), ("more/dw_bounds_1pct.csv", 0.01, None)],
)
def test_every_entry_of_savin_and_white(shared_folder, name, level, misprint):
    """Savin & White (1977), Econometrica 45:1989: all entries, to 1e-6 of the exact ones."""
    table = pd.read_csv(shared_folder / "reference" / name)
    got = np.array(
        [durbin_watson_bounds(int(n), int(k), level) for n, k in zip(table.n, table.k, strict=True)]
    )
    exact = table[["dL_computed", "dU_computed"]].to_numpy()
    assert np.abs(got - exact).max() < 1e-6  # the file has six decimals
    printed = table[["dL_published", "dU_published"]].to_numpy()
    if misprint is not None:
        # Two decimals; 26 of the 532 printed entries are off by more than half a digit.
        assert np.abs(got - printed).max() < misprint
        assert np.count_nonzero(np.abs(got - printed) > 0.0051) <= 26
    else:
        assert np.mean(np.abs(got - printed) <= 0.00051) > 0.9


def test_moments_of_von_neumanns_ratio():
    """Theory, from memory: von Neumann (1941), Ann. Math. Stat. 12:367; ratio d n / (n − 1), n = 20."""
    mean, variance = moments(20, np.full((20, 1), 1 / np.sqrt(20)))
    assert mean * 20 / 19 == pytest.approx(2.1052631578947367, rel=1e-12)
    assert variance * (20 / 19) ** 2 == pytest.approx(0.19994584799950013, rel=1e-9)


def test_statistic_equals_statsmodels():
    """Cross-check: statsmodels.stats.stattools.durbin_watson on the residuals of the Longley regression."""
    data = sm.datasets.longley.load_pandas()
    fit = sm.OLS(data.endog, sm.add_constant(data.exog)).fit()
    got = durbin_watson(fit.resid, fit.model.exog, alternative="two-sided")
    assert got.statistic == pytest.approx(sm.stats.stattools.durbin_watson(fit.resid), rel=1e-6)
    # Published: Longley's d is printed as 2.559488 by NIST-tested packages (from memory, reproduced here).
    assert got.statistic == pytest.approx(2.559488, abs=5e-6)


@pytest.mark.parametrize("alternative", ["positive", "negative", "two-sided"])
def test_exact_pvalue_against_simulation(alternative):
    """Independent method: the share of 200,000 simulated regressions beyond the observed d."""
    rng = np.random.default_rng(5)
    design = np.column_stack([np.ones(12), rng.normal(size=(12, 2))])
    project = np.eye(12) - design @ np.linalg.pinv(design)
    z = rng.normal(size=(200_000, 12)) @ project
    d = np.sum(np.diff(z, axis=1) ** 2, axis=1) / np.sum(z**2, axis=1)
    got = durbin_watson(z[3], design, alternative)
    share = {"positive": np.mean(d <= d[3]), "negative": np.mean(d >= d[3])}
    share["two-sided"] = min(1.0, 2 * min(share.values()))
    assert got.pvalue == pytest.approx(share[alternative], abs=0.01)


def test_chi_squared_ratio_as_closed_form():
    """Theory: with one positive and m equal negative weights the tail is an F tail."""
    for m, c in ((3, 0.5), (50, 7.0), (400, 30.0)):
        weights = np.concatenate(([1.0], np.full(m, -c / m)))
        assert upper_tail(weights) == pytest.approx(f_law.sf(c, 1, m), rel=1e-10)
