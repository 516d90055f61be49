"""Covariances that hold under dependence, against published figures."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from statsmodels.stats.sandwich_covariance import cov_cluster, cov_hac_simple

from auditd.stats import cluster_covariance, newey_west


def fit_of(y, design):
    """Least-squares coefficients and residuals."""
    y, design = np.asarray(y, dtype=float), np.asarray(design, dtype=float)
    b = np.linalg.lstsq(design, y, rcond=None)[0]
    return b, y - design @ b


def test_newey_west_of_macro_growth(shared_folder):
    """Published: statsmodels test_diagnostic.py, R sandwich NeweyWest(prewhite = FALSE), lags 4, 10."""
    d = pd.read_csv(shared_folder / "reference/data/macrodata_growth.csv")
    design = np.column_stack([np.ones(len(d)), d.g_realgdp, d.lag_realint])
    b, e = fit_of(d.g_realinv, design)
    assert b == pytest.approx([-9.48167277465485, 4.3742216647032, -0.613996969478989], abs=1e-10)
    four = [
        1.385551290884014, -0.3133096102522685, -0.0597207976835705, -0.3133096102522685, 0.1081011690351306,
        0.000389440793564336, -0.0597207976835705, 0.000389440793564339, 0.0862118527405036,
    ]  # fmt: skip
    ten = [
        1.257386180080192, -0.2871560199899846, -0.03958300024627573, -0.2871560199899845, 0.1049107028987101,
        0.0003896205316866944, -0.03958300024627578, 0.0003896205316866961, 0.0985539340694839,
    ]  # fmt: skip
    assert newey_west(e, design, 4).ravel() == pytest.approx(four, abs=1e-10)
    assert newey_west(e, design, 10).ravel() == pytest.approx(ten, abs=1e-10)


def test_clusters_of_ten_firms(shared_folder):
    """Published: statsmodels results_panelrobust.py (Stata xtscc help, Hoechle 2007), Grunfeld's firms."""
    d = pd.read_csv(shared_folder / "reference/data/grunfeld10.csv")
    design = np.column_stack([d.value, d.capital, np.ones(len(d))])
    _, e = fit_of(d.invest, design)
    expected = [
        0.00025262993207, -0.00065043385106, 0.20961897960949, -0.00065043385106, 0.00721940994738,
        -1.2171040967615, 0.20961897960949, -1.2171040967615, 417.18890043724,
    ]  # fmt: skip
    assert cluster_covariance(e, design, d.firm).ravel() == pytest.approx(expected, rel=5e-7)


def test_petersens_standard_errors(shared_folder):
    """Published, from memory: Petersen (2009) test data, by firm 0.0670 and 0.0506, by year 0.0334."""
    d = pd.read_csv(shared_folder / "reference/more/petersen_cl.csv")
    design = np.column_stack([np.ones(len(d)), d.x])
    _, e = fit_of(d.y, design)
    by_firm = np.sqrt(np.diag(cluster_covariance(e, design, d.firm)))
    assert by_firm == pytest.approx([0.0670, 0.0506], abs=5.5e-5)
    by_year = np.sqrt(np.diag(cluster_covariance(e, design, d.year)))
    assert by_year[1] == pytest.approx(0.0334, abs=5.5e-5)


def test_greene_investment_equation(shared_folder):
    """Published: R sandwich vignette (Zeileis 2004), hac-test1, lag 4, no prewhitening."""
    d = pd.read_csv(shared_folder / "reference/more/greene_investment.csv").dropna()
    design = np.column_stack([np.ones(len(d)), d.RealGNP, d.RealInt])
    b, e = fit_of(d.RealInv, design)
    assert b == pytest.approx([-12.533601, 0.169136, -1.001438], abs=5.5e-7)
    got = np.sqrt(np.diag(newey_west(e, design, 4)))
    assert got == pytest.approx([18.958298, 0.016751, 3.342375], abs=5.5e-7)


def test_both_equal_statsmodels():
    """Cross-check: statsmodels cov_hac_simple and cov_cluster on the data it carries."""
    d = sm.datasets.grunfeld.load_pandas().data
    fit = sm.OLS(d.invest, sm.add_constant(d[["value", "capital"]])).fit()
    groups = d.firm.astype("category").cat.codes.to_numpy()
    design = fit.model.exog
    assert cluster_covariance(fit.resid, design, d.firm) == pytest.approx(cov_cluster(fit, groups), rel=1e-9)
    for lags in (0, 1, 5):
        expected = cov_hac_simple(fit, nlags=lags, use_correction=False)
        assert newey_west(fit.resid, design, lags) == pytest.approx(expected, rel=1e-9)
