"""Trend, change and order tests against published figures."""

import itertools

import numpy as np
import pandas as pd
import pymannkendall
import pytest
import ruptures
import statsmodels.api as sm
from scipy.stats import theilslopes
from statsmodels.sandbox.stats.runs import runstest_1samp

from auditd.stats import mann_kendall, pettitt, runs_test, von_neumann_rank

# Sen (1968), p. 1385: times and values.
SEN = ((1, 2, 3, 4, 10, 12, 18), (9, 15, 19, 20, 45, 55, 78))


def read(shared_folder, name):
    """One published data file as a frame."""
    return pd.read_csv(shared_folder / "reference/data" / name)


def intercept(x, times, slope):
    """Conover's intercept of Sen's line."""
    return np.median(x) - slope * np.median(times)


@pytest.mark.parametrize(
    ("name", "z"),
    [("nist_strd_lew.csv", 2.6938), ("eh_randwalk.csv", -20.3239), ("eh_zarr13.csv", -3.2306)],
)
def test_runs_of_case_studies(shared_folder, name, z):
    """Recalled, reproduced: e-Handbook 1.3.5.13, 1.4.2.3, 1.4.2.8 (ties count above)."""
    assert runs_test(read(shared_folder, name).y).statistic == pytest.approx(z, abs=5.8e-5)


def test_runs_of_the_standard_resistor(shared_folder):
    """Recalled, reproduced: e-Handbook 1.4.2.7."""
    assert runs_test(read(shared_folder, "eh_dziuba1.csv").resistance).statistic == pytest.approx(
        -30.5629, abs=5.8e-5
    )


def test_runs_of_lew_in_parts(shared_folder):
    """Computed (counts) and by statsmodels 0.15.0 (z, p), no published figure."""
    got = runs_test(read(shared_folder, "nist_strd_lew.csv").y)
    assert (got.n_runs, got.expected_runs) == (120, 101)
    assert got.sd_runs == pytest.approx(7.05327, abs=9.4e-6)
    assert got.statistic == pytest.approx(2.6937825907939654, abs=1e-10)
    assert got.pvalue == pytest.approx(0.007064622954962975, abs=1e-10)


def test_runs_of_a_straight_line():
    """Published: JuliaStats/HypothesisTests.jl, test/wald_wolfowitz.jl, x = 1 … 1000."""
    got = runs_test(np.arange(1.0, 1001.0))
    assert got.n_runs == 2
    assert got.expected_runs == 501
    assert got.statistic == pytest.approx(-31.575338477995764, abs=1e-9)


def test_runs_equal_statsmodels():
    """Cross-check: statsmodels runstest_1samp without correction, about median and mean."""
    x = sm.datasets.nile.load_pandas().data.volume.to_numpy()
    for cutoff in ("median", "mean"):
        z, p = runstest_1samp(x, cutoff=cutoff, correction=False)
        got = runs_test(x, cutoff)
        assert (got.statistic, got.pvalue) == pytest.approx((z, p), rel=1e-10)


def test_mann_kendall_of_the_rhine(shared_folder):
    """Published: R trend 1.1.6 vignette, annual discharge at Maxau 1965-2009."""
    got = mann_kendall(read(shared_folder, "trend_maxau_q.csv").Q)
    assert (got.s, got.var_s) == (-144, 10450)
    assert got.tau == pytest.approx(-0.1454545, abs=5.8e-8)
    assert got.statistic == pytest.approx(-1.3989, abs=5.8e-5)
    assert got.pvalue == pytest.approx(0.1619, abs=5.8e-5)


def test_sulfate_of_epa(shared_folder):
    """Published: USEPA (2009) Unified Guidance, Example 17-6; EnvStats 3.1.0 (tau-a)."""
    d = read(shared_folder, "epa2009_ex17_6_sulfate.csv")
    got = mann_kendall(d.sulfate_ppm, d.date)
    assert (got.s, got.var_s) == (194, pytest.approx(1428.0, abs=1e-9))
    assert got.tau == pytest.approx(0.7667984, abs=5.5e-8)
    assert got.statistic == pytest.approx(5.107322, abs=5.5e-7)
    assert got.slope == pytest.approx(26.6666667, abs=5.5e-8)
    assert intercept(d.sulfate_ppm, d.date, got.slope) == pytest.approx(-1909.3333333, abs=2e-7)


def test_sens_own_example():
    """Published: Sen (1968), J. Am. Stat. Assoc. 63:1379, worked example: 4, 93 % limits 26/7 and 35/8."""
    x, y = SEN
    got = mann_kendall(y, x, confidence=0.93)
    assert (got.slope, got.slope_low, got.slope_high) == pytest.approx((4, 26 / 7, 35 / 8), abs=1e-12)
    assert np.median(np.subtract(y, np.multiply(got.slope, x))) == pytest.approx(6, abs=1e-12)
    assert intercept(y, x, got.slope) == pytest.approx(4, abs=1e-12)


def test_pymannkendall_series(shared_folder):
    """Published: pyMannKendall's tests (against R modifiedmk, fume, rkt, trend): 360 values, 7 missing."""
    x = read(shared_folder, "pymannkendall_360.csv").x
    kept = np.flatnonzero(x.notna())
    values = x.to_numpy()[kept]
    plain = mann_kendall(values, kept)
    assert plain.s == -1959
    assert plain.var_s == pytest.approx(4889800.333333333, abs=1e-8)
    assert plain.statistic == pytest.approx(-0.8854562842589916, abs=1e-9)
    assert plain.pvalue == pytest.approx(0.37591058740506833, abs=1e-9)
    assert plain.slope == pytest.approx(-0.006369426751592357, abs=1e-12)
    assert intercept(values, kept, plain.slope) == pytest.approx(96.15286624203821, abs=1e-7)


@pytest.mark.parametrize(
    ("lags", "var_s", "z", "p"),
    [
        (None, 259723.81316716125, -3.8419950613710894, 0.00012203829241275166),
        (3, 14228919.889368296, -0.5190709455046154, 0.6037112685123898),
    ],
)
def test_hamed_rao_correction(shared_folder, lags, var_s, z, p):
    """Published: Hamed & Rao (1998); pyMannKendall's tests, all lags and lags 1 to 3."""
    x = read(shared_folder, "pymannkendall_360.csv").x
    kept = np.flatnonzero(x.notna())
    got = mann_kendall(x.to_numpy()[kept], kept, correction="hamed-rao", lags=lags)
    assert got.var_s == pytest.approx(var_s, rel=1e-10)
    assert got.statistic == pytest.approx(z, abs=1e-6)
    assert got.pvalue == pytest.approx(p, abs=1e-6)


def test_mann_kendall_equals_pymannkendall():
    """Cross-check: pymannkendall and scipy's theilslopes on the Nile's flow and on a tied series."""
    nile = sm.datasets.nile.load_pandas().data.volume.to_numpy()
    for x in (nile, np.round(nile / 100)):
        theirs, ours = pymannkendall.original_test(x), mann_kendall(x)
        assert (ours.s, ours.var_s, ours.tau) == pytest.approx(
            (theirs.s, theirs.var_s, theirs.Tau), rel=1e-12
        )
        assert (ours.statistic, ours.pvalue) == pytest.approx((theirs.z, theirs.p), rel=1e-10)
        slope, _, low, high = theilslopes(x)
        assert (ours.slope, ours.slope_low, ours.slope_high) == pytest.approx((slope, low, high), abs=1e-12)
    theirs, ours = pymannkendall.hamed_rao_modification_test(nile), mann_kendall(nile, correction="hamed-rao")
    assert (ours.var_s, ours.statistic) == pytest.approx((theirs.var_s, theirs.z), rel=1e-9)


def test_morley_trend_and_change(shared_folder):
    """Computed, no published figure: Michelson 1879; Mann-Kendall z, Pettitt's K and where."""
    x = read(shared_folder, "morley.csv").sort_values(["Expt", "Run"]).Speed
    assert mann_kendall(x).statistic == pytest.approx(-3.772, abs=5.5e-4)
    got = pettitt(x)
    assert (got.statistic, got.index) == (1158, 28)


def test_pettitts_example(shared_folder):
    """Published: Pettitt (1979), Applied Statistics 28:126, Page's (1955) data: K = 232 after the 17th."""
    got = pettitt(read(shared_folder, "pettitt_page.csv").x)
    assert (got.statistic, got.index) == (232, 16)
    assert got.pvalue == pytest.approx(0.01456, abs=5.8e-6)


def test_the_niles_change():
    """From memory, reproduced: R trend's pettitt.test(Nile): U* = 1617, p = 3.591e-07, after year 28."""
    x = sm.datasets.nile.load_pandas().data.volume.to_numpy()
    got = pettitt(x)
    assert (got.statistic, got.index) == (1617, 27)
    assert got.pvalue == pytest.approx(3.591e-07, abs=5.5e-11)
    # Cross-check: the least-squares change point of ruptures is at the same place.
    assert ruptures.Dynp(model="l2", min_size=2, jump=1).fit(x).predict(n_bkps=1)[0] == got.index + 1


def test_bartels_own_example(shared_folder):
    """Published: Bartels (1982), p. 43; R trend's vignette prints the lower tail of the beta law."""
    got = von_neumann_rank(read(shared_folder, "bartels1982_ranks.csv").x)
    assert got.statistic == pytest.approx(0.97626, abs=5.8e-6)
    assert got.lower == pytest.approx(0.009463, abs=5.5e-7)
    assert got.pvalue == pytest.approx(2 * got.lower, rel=1e-12)


def test_tourists_of_gibbons_and_chakraborti(shared_folder):
    """Published: Gibbons & Chakraborti (2003), Example 5.1, n = 13; R randtests (beta, left-sided)."""
    got = von_neumann_rank(read(shared_folder, "gibbons_tourists.csv").iloc[:, 0], alternative="positive")
    assert got.z == pytest.approx(-3.6453, abs=5.8e-5)
    assert got.pvalue == pytest.approx(1.21e-08, abs=5.8e-11)
    assert got.statistic == pytest.approx(0.098901, abs=5.5e-7)


def test_exact_law_for_eight(shared_folder):
    """Computed, no published figure: enumeration of the 8! orders, lower 80 values."""
    table = read(shared_folder, "rvn_exact_n8.csv").set_index("NM").P_lower
    seen = {}
    rng = np.random.default_rng(2)
    orders = [np.arange(8), *(rng.permutation(8) for _ in range(3000))]
    for order in orders:
        seen[int(np.sum(np.diff(order) ** 2))] = order
    assert len(set(seen) & set(table.index)) > 60
    for nm, order in ((nm, seen[nm]) for nm in sorted(set(seen) & set(table.index))):
        assert von_neumann_rank(order.astype(float)).lower == pytest.approx(table[nm], rel=1e-12)
    assert [table[nm] for nm in (7, 10, 13)] == pytest.approx(
        [4.96031746031746e-05, 0.00014880952380952382, 0.0005456349206349206], abs=1e-12
    )


@pytest.mark.parametrize("x", [(1, 2, 2, 3, 5, 4), (1, 1, 1, 2, 2, 9), (3, 1, 4, 1, 5, 9)])
def test_exact_law_with_ties(x):
    """Independent method: all 720 orders of six values with ties, one by one."""
    got = von_neumann_rank(x)
    ranks = pd.Series(x).rank().to_numpy()
    steps = [
        sum((a - b) ** 2 for a, b in itertools.pairwise(order)) for order in itertools.permutations(ranks)
    ]
    observed = np.sum(np.diff(ranks) ** 2)
    assert got.lower == pytest.approx(np.mean(np.array(steps) <= observed + 1e-9), rel=1e-12)
    assert got.upper == pytest.approx(np.mean(np.array(steps) >= observed - 1e-9), rel=1e-12)
