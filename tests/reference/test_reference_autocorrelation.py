"""Autocorrelations, portmanteau and Breusch-Godfrey tests against published figures."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from statsmodels.stats.diagnostic import acorr_breusch_godfrey, acorr_ljungbox
from statsmodels.tsa.stattools import acf

from auditd.stats import autocorrelation, breusch_godfrey, durbin_watson, ljung_box

# statsmodels 0.15 announces that its functions will return objects in place of tuples.
pytestmark = pytest.mark.filterwarnings("ignore:.*currently returns a plain tuple:FutureWarning")


def residuals_of(y, *regressors):
    """Least-squares residuals of y on a constant and the regressors, and the design."""
    design = np.column_stack([np.ones(len(y)), *regressors])
    y = np.asarray(y, dtype=float)
    return y - design @ np.linalg.lstsq(design, y, rcond=None)[0], design


@pytest.mark.parametrize(
    ("name", "r1", "rel"),
    [
        ("lew", -0.307304800605679, 1e-12),
        ("mavro", 0.937989183438248, 1e-12),
        ("michelso", 0.535199668621283, 1e-12),
        ("numacc1", -0.5, 1e-12),
        ("numacc2", -0.999, 1e-12),
        ("numacc3", -0.999, 1e-11),
        ("pidigits", -0.00355099287237972, 1e-12),
    ],
)
def test_lag_one_of_nist_strd(shared_folder, name, r1, rel):
    """Published: NIST StRD, Univariate Summary Statistics, certified r(1)."""
    x = pd.read_csv(shared_folder / f"reference/data/nist_strd_{name}.csv").y
    assert autocorrelation(x, 1).statistic == pytest.approx(r1, rel=rel)


@pytest.mark.parametrize(
    ("name", "mean", "sd", "r1", "tolerance"),
    [
        ("eh_randwalk", 3.216681, 2.078675, 0.987, 5.5e-4),
        ("eh_zarr13", 9.26146, 0.022789, 0.281, 5.5e-4),
        ("eh_soulen", 2898.562, 1.305, 0.31, 5.8e-3),
    ],
)
def test_lag_one_of_case_studies(shared_folder, name, mean, sd, r1, tolerance):
    """Recalled figures, reproduced from public data: NIST/SEMATECH e-Handbook 1.4.2.3, 1.4.2.8, 1.4.2.4."""
    x = pd.read_csv(shared_folder / f"reference/data/{name}.csv").y
    assert x.mean() == pytest.approx(mean, abs=6e-4)
    assert x.std() == pytest.approx(sd, abs=6e-4)
    assert autocorrelation(x, 1).statistic == pytest.approx(r1, abs=tolerance)


def test_twenty_lags_of_lew(shared_folder):
    """Recalled figures, reproduced: e-Handbook 1.3.5.12, beam deflections (two decimals, one where zero)."""
    x = pd.read_csv(shared_folder / "reference/data/nist_strd_lew.csv").y
    expected = [
        -0.31, -0.74, 0.77, 0.21, -0.9, 0.38, 0.63, -0.77, -0.12, 0.82,
        -0.4, -0.55, 0.73, 0.07, -0.76, 0.4, 0.48, -0.7, -0.03, 0.7,
    ]  # fmt: skip
    assert autocorrelation(x, 20).r[1:] == pytest.approx(expected, abs=0.006)


def test_drift_of_the_standard_resistor(shared_folder):
    """Recalled figure, reproduced: e-Handbook 1.4.2.7, r(1) = .97 of a drifting series."""
    x = pd.read_csv(shared_folder / "reference/data/eh_dziuba1.csv").resistance
    assert autocorrelation(x, 1).statistic == pytest.approx(0.97, abs=0.0058)


def test_morley_whole_and_within_experiments(shared_folder):
    """Computed, no published figure: Michelson 1879, r(1) over all and pooled within the experiments."""
    d = pd.read_csv(shared_folder / "reference/data/morley.csv").sort_values(["Expt", "Run"])
    assert autocorrelation(d.Speed, 1).statistic == pytest.approx(0.5351996686212833, abs=1e-9)
    within = d.Speed - d.groupby("Expt").Speed.transform("mean")
    parts = [g.to_numpy() for _, g in within.groupby(d.Expt)]
    pooled = sum(g[1:] @ g[:-1] for g in parts) / sum(g @ g for g in parts)
    assert pooled == pytest.approx(0.4404509942503486, abs=1e-9)
    single = [autocorrelation(g, 1).statistic for g in parts]
    assert single == pytest.approx([0.36, 0.68, 0.528, 0.381, 0.322], abs=0.0051)


def test_lithography_in_run_order(shared_folder):
    """Computed, no published figure: e-Handbook 6.6.1 line widths, r(1) of values and of cassette means."""
    d = pd.read_csv(shared_folder / "reference/data/eh_lithography.csv").sort_values("run_order")
    assert autocorrelation(d.linewidth, 1).statistic == pytest.approx(0.6072572710632022, abs=1e-9)
    means = d.groupby("cassette", sort=False).linewidth.mean()
    assert autocorrelation(means, 1).statistic == pytest.approx(0.3212709602415108, abs=1e-9)


def test_limits_equal_statsmodels():
    """Cross-check: statsmodels acf with Bartlett's formula, on the Nile's flow and the sunspots."""
    for x in (
        sm.datasets.nile.load_pandas().data.volume,
        sm.datasets.sunspots.load_pandas().data.SUNACTIVITY,
    ):
        for lags in (10, 60):
            r, limits = acf(x, nlags=lags, alpha=0.05, fft=False)
            got = autocorrelation(x, lags)
            assert got.r == pytest.approx(r, abs=1e-12)
            assert got.low == pytest.approx(np.maximum(limits[:, 0], -1), abs=1e-12)
            assert got.high == pytest.approx(np.minimum(limits[:, 1], 1), abs=1e-12)


def test_nile_first_autocorrelation():
    """From memory, reproduced: R's acf(Nile) at lag 1, 0.498; the data statsmodels carries."""
    got = autocorrelation(sm.datasets.nile.load_pandas().data.volume, 1)
    assert got.statistic == pytest.approx(0.498, abs=5.5e-4)


def macro_residuals(shared_folder):
    """Residuals and design of the macro-growth regression."""
    d = pd.read_csv(shared_folder / "reference/data/macrodata_growth.csv")
    return residuals_of(d.g_realinv, d.g_realgdp, d.lag_realint)


def test_box_tests_of_macro_residuals(shared_folder):
    """Published: statsmodels test_diagnostic.py, printed by R's Box.test (also fitdf = 2, and 13 lags)."""
    e, _ = macro_residuals(shared_folder)
    got = ljung_box(e, 4)
    assert [got.statistic, got.pvalue, got.box_pierce, got.box_pierce_pvalue] == pytest.approx(
        [5.23587172795227, 0.263940335284713, 5.12462932741681, 0.2747471266820692], abs=1e-10
    )
    fitted = ljung_box(e, 4, n_fitted=2)
    assert [fitted.pvalue, fitted.box_pierce_pvalue] == pytest.approx(
        [0.0729532930400377, 0.0771260128929921], abs=1e-10
    )
    small = ljung_box(e[:30], 13)
    assert [small.statistic, small.pvalue, small.box_pierce, small.box_pierce_pvalue] == pytest.approx(
        [9.61503968281915, 0.72507000996945, 7.41692150864936, 0.87940785887006], abs=1e-9
    )


def test_box_test_of_a_share_price(shared_folder):
    """Recalled, reproduced: Hyndman & Athanasopoulos (2018), section 3.3, naive residuals of goog200."""
    close = pd.read_csv(shared_folder / "reference/data/fpp2_goog200.csv").close
    got = ljung_box(np.diff(close), 10)
    assert [got.box_pierce, got.statistic] == pytest.approx([10.611, 11.031], abs=5.5e-4)
    assert [got.box_pierce_pvalue, got.pvalue] == pytest.approx([0.3886, 0.3551], abs=5.8e-5)


def test_box_test_example_of_r(shared_folder):
    """Published: R stats example(Box.test), stats-Ex.Rout.save."""
    got = ljung_box(pd.read_csv(shared_folder / "reference/data/r_boxtest_sim.csv").x, 1)
    assert [got.box_pierce, got.statistic] == pytest.approx([0.0013332, 0.0013736], abs=5.5e-8)
    assert [got.box_pierce_pvalue, got.pvalue] == pytest.approx([0.9709, 0.9704], abs=5.8e-5)


def test_ljung_box_of_lew(shared_folder):
    """Computed by statsmodels 0.15.0, no published figure."""
    x = pd.read_csv(shared_folder / "reference/data/nist_strd_lew.csv").y
    got = [ljung_box(x, lags).statistic for lags in (1, 5, 10)]
    assert got == pytest.approx([19.17198, 429.889293, 815.539442], abs=1e-5)


def test_ljung_box_equals_statsmodels_for_few_and_many_lags():
    """Cross-check: statsmodels acorr_ljungbox, below and above the switch from products to a transform."""
    x = sm.datasets.sunspots.load_pandas().data.SUNACTIVITY
    table = acorr_ljungbox(x, lags=[1, 40, 41, 120])
    for lags in (1, 40, 41, 120):
        assert ljung_box(x, lags).statistic == pytest.approx(table.lb_stat[lags], rel=1e-10)


@pytest.mark.parametrize(
    ("response", "lags", "lm", "p", "tolerance"),
    [
        ("y1", 1, 0.0036887, 0.9516, 5.5e-8),
        ("y1", 4, 3.0822, 0.5442, 5.8e-5),
        ("y2", 1, 19.907, 8.128e-06, 5.5e-4),
        ("y2", 4, 23.687, 9.228e-05, 5.5e-4),
    ],
)
def test_breusch_godfrey_examples_of_lmtest(shared_folder, response, lags, lm, p, tolerance):
    """Published: lmtest 0.9-40, example(bgtest), presample residuals zero."""
    d = pd.read_csv(shared_folder / "reference/data/lmtest_bgtest_sim.csv")
    got = breusch_godfrey(*residuals_of(d[response], d.x), lags)
    assert got.statistic == pytest.approx(lm, abs=tolerance)
    assert got.pvalue == pytest.approx(p, rel=1.1e-4)


def test_breusch_godfrey_of_commodity_prices(shared_folder):
    """Published: lmtest example(jocci), Stock & Watson's index: constant model and AR(6)."""
    d = pd.read_csv(shared_folder / "reference/data/lmtest_jocci.csv")
    e, design = residuals_of(d.dy)
    assert breusch_godfrey(e, design, 1).statistic == pytest.approx(91.037, abs=5.5e-4)
    assert durbin_watson(e, design).statistic == pytest.approx(1.0581, abs=5.8e-5)
    got = breusch_godfrey(*residuals_of(d.dy, *(d[f"dy{lag}"] for lag in range(1, 7))), 1)
    assert got.statistic == pytest.approx(0.19999, abs=5.8e-6)
    assert got.pvalue == pytest.approx(0.6547, abs=5.8e-5)


def test_breusch_godfrey_of_macro_residuals(shared_folder):
    """Published: statsmodels test_diagnostic.py, values printed by R's bgtest, order 4, LM and F."""
    got = breusch_godfrey(*macro_residuals(shared_folder), 4)
    assert [got.statistic, got.pvalue, got.f, got.f_pvalue] == pytest.approx(
        [4.771042651230007, 0.3116067133066697, 1.179280833676792, 0.321197487261203], abs=1e-9
    )


def test_breusch_godfrey_equals_statsmodels():
    """Cross-check: statsmodels acorr_breusch_godfrey on the Longley and macro data it carries."""
    data = sm.datasets.macrodata.load_pandas().data
    fit = sm.OLS(np.log(data.realgdp), sm.add_constant(np.log(data[["realcons", "realinv"]]))).fit()
    for lags in (1, 4, 12):
        lm, p, f, f_p = acorr_breusch_godfrey(fit, nlags=lags)
        got = breusch_godfrey(fit.resid, fit.model.exog, lags)
        assert [got.statistic, got.pvalue, got.f, got.f_pvalue] == pytest.approx([lm, p, f, f_p], rel=1e-7)
