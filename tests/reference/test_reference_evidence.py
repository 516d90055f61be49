"""Evidence against published values, textbook formulas and general-purpose libraries."""

import csv
import datetime as dt

import numpy as np
import pytest
from scipy import stats
from scipy.linalg import toeplitz
from scipy.signal import lfilter

from auditd.evidence import contrast, effective_number, verdict
from auditd.evidence.chains import along_order
from auditd.evidence.moments import sum_moments
from auditd.evidence.persistence import inflation, lags_needed, same_cell_pairs
from auditd.evidence.restricted import evaluate
from auditd.evidence.steps import segments

# Student (1908), Biometrika 6:1-25, additional hours of sleep (Cushny & Peebles 1905); R's `sleep`
SLEEP_1 = [0.7, -1.6, -0.2, -1.2, -0.1, 3.4, 3.7, 0.8, 0.0, 2.0]
SLEEP_2 = [1.9, 0.8, 1.1, 0.1, -0.1, 4.4, 5.5, 1.6, 4.6, 3.4]

# Davies & Goldsmith (1972), Statistical Methods in Research and Production, table 6.1; lme4's `Dyestuff`
DYESTUFF = [
    [1545, 1440, 1440, 1520, 1580],
    [1540, 1555, 1490, 1560, 1495],
    [1595, 1550, 1605, 1510, 1560],
    [1445, 1440, 1595, 1465, 1545],
    [1595, 1630, 1515, 1635, 1625],
    [1520, 1455, 1450, 1480, 1445],
]


def test_sleep_by_welch():
    """R 4, example(t.test): Welch's 95 % interval −3.3654832 … 0.2054832 for group 1 − 2 (recalled,
    reproduced)."""
    found = contrast(SLEEP_1 + SLEEP_2, cells=[1] * 10 + [2] * 10, a=1, b=2)
    assert found.naive_low == pytest.approx(-0.2054832, abs=5e-7)
    assert found.naive_high == pytest.approx(3.3654832, abs=5e-7)


def test_sleep_by_pairs():
    """R 4, example(t.test), paired: 1.58 (0.7001142 … 2.4598858; recalled, reproduced); ours pays for
    dependence among ten."""
    found = contrast(SLEEP_1 + SLEEP_2, cells=[1] * 10 + [2] * 10, a=1, b=2, blocks=list(range(10)) * 2)
    assert found.estimate == pytest.approx(1.58, abs=0.02)
    assert found.low <= 0.7001142 + 0.02
    assert found.high >= 2.4598858 - 0.02
    assert (found.high - found.low) / (2.4598858 - 0.7001142) < 1.35


def test_sleep_effect_size():
    """Hedges' g of two groups of ten: d = 0.8321811 (Cohen 1988, R's effsize) × J(18) = 0.95765 exact
    (Hedges 1981)."""
    found = contrast(SLEEP_1 + SLEEP_2, cells=[1] * 10 + [2] * 10, a=1, b=2)
    ratio = found.hedges_g / found.estimate
    pooled = np.sqrt((np.var(SLEEP_1, ddof=1) + np.var(SLEEP_2, ddof=1)) / 2)
    assert ratio == pytest.approx(0.957651 / pooled, rel=1e-4)


def test_restricted_likelihood_by_matrices():
    """Estimate, variance and restricted likelihood (Harville 1977, JASA 72:320) from n × n matrices, for
    three coefficients."""
    rng = np.random.default_rng(1)
    n = 40
    code = rng.integers(0, 3, n)
    y = rng.standard_normal(n)
    x = np.eye(3)[code]
    c = np.array([-1.0, 1.0, 0.0])
    phi = np.array([-0.5, 0.2, 0.9])
    fits = evaluate(sum_moments(y, code, np.eye(3), along_order(n)), c, phi, np.zeros((3, 3)), 3)
    logs = []
    for i, one in enumerate(phi):
        v = toeplitz(one ** np.arange(n)) / (1 - one**2)
        gram = x.T @ np.linalg.solve(v, x)
        beta = np.linalg.solve(gram, x.T @ np.linalg.solve(v, y))
        rest = y - x @ beta
        size = rest @ np.linalg.solve(v, rest) / (n - 3)
        assert fits.estimate[i] == pytest.approx(c @ beta, rel=1e-9)
        assert fits.unit[i] == pytest.approx(c @ np.linalg.solve(gram, c), rel=1e-9)
        assert fits.sigma2[i] == pytest.approx(size, rel=1e-9)
        logs.append(
            -0.5 * np.linalg.slogdet(v)[1]
            - 0.5 * np.linalg.slogdet(gram)[1]
            - 0.5 * (n - 3) * np.log(size * (n - 3))
        )
    assert np.diff(fits.loglik) == pytest.approx(np.diff(logs), rel=1e-8)


@pytest.mark.parametrize("order", ["blocked", "random"])
def test_standard_error_by_statsmodels_arima(order):
    """At 1,500 runs the interval is statsmodels' ARIMA(1, 0, 0) with a step regressor: estimate and
    standard error."""
    from statsmodels.tsa.arima.model import ARIMA

    rng = np.random.default_rng(2)
    n = 1500
    values = lfilter([1.0], [1.0, -0.6], rng.standard_normal(n))
    cells = np.repeat([0, 1], n // 2) if order == "blocked" else rng.integers(0, 2, n)
    fitted = ARIMA(values, exog=cells.astype(float), order=(1, 0, 0), trend="c").fit()
    found = contrast(values, cells=cells, a=0, b=1)
    assert found.estimate == pytest.approx(fitted.params[1], abs=0.02 * fitted.bse[1])
    assert (found.high - found.low) / 2 == pytest.approx(1.96 * fitted.bse[1], rel=0.05)


def test_estimate_by_statsmodels_glsar():
    """Feasible generalised least squares by statsmodels' GLSAR on the Nile's flow before and after 1898."""
    import statsmodels.api as sm

    flow = sm.datasets.nile.load_pandas().data["volume"].to_numpy()
    cells = (np.arange(1871, 1971) > 1898).astype(int)
    fitted = sm.GLSAR(flow, sm.add_constant(cells.astype(float)), 1).iterative_fit(50)
    found = contrast(flow, cells=cells, a=0, b=1)
    assert found.estimate == pytest.approx(fitted.params[1], abs=0.15 * fitted.bse[1])
    assert (found.high - found.low) / 2 == pytest.approx(1.98 * fitted.bse[1], rel=0.15)


def test_step_of_the_nile():
    """Cobb (1978), Biometrika 65:243-251: the flow drops between 1898 and 1899."""
    import statsmodels.api as sm

    flow = sm.datasets.nile.load_pandas().data["volume"].to_numpy()
    assert segments(flow).tolist() == [0, 28]


def test_partly_crossed_hosts_by_statsmodels_mixedlm():
    """Twelve hosts of which four ran one side only: MixedLM's restricted likelihood gives the same estimate
    and standard error."""
    import pandas as pd
    from statsmodels.regression.mixed_linear_model import MixedLM

    rng = np.random.default_rng(3)
    n = 480
    host = np.arange(n) % 12
    cells = rng.integers(0, 2, n)
    cells[host < 2], cells[host > 9] = 0, 1
    values = rng.standard_normal(n) + rng.standard_normal(12)[host]
    frame = pd.DataFrame({"y": values, "b": cells, "host": host})
    fitted = MixedLM.from_formula("y ~ b", groups="host", data=frame).fit(reml=True)
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    assert "random effect" in found.method
    assert found.estimate == pytest.approx(fitted.params["b"], abs=0.15 * fitted.bse["b"])
    t = stats.t.ppf(0.975, 7.5)
    assert (found.high - found.low) / 2 == pytest.approx(t * fitted.bse["b"], rel=0.35)


def test_evenly_crossed_hosts_by_a_paired_t():
    """Balanced hosts: the nuisance × cell mean square is the paired t interval of host means (Snedecor &
    Cochran, section 16)."""
    rng = np.random.default_rng(4)
    host, cells = np.arange(480) % 12, (np.arange(480) // 12) % 2
    values = rng.standard_normal(480) + rng.standard_normal((12, 2))[host, cells]
    means = np.array([[values[(host == h) & (cells == s)].mean() for s in (0, 1)] for h in range(12)])
    reference = stats.ttest_rel(means[:, 1], means[:, 0]).confidence_interval(0.95)
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    half = (reference.high - reference.low) / 2
    assert found.estimate == pytest.approx((reference.high + reference.low) / 2, abs=0.15 * half)
    assert (found.high - found.low) / 2 == pytest.approx(half, rel=0.06)


def test_effective_number_of_batches():
    """Dyestuff: variance components 1764.05 and 2451.25 (Davies & Goldsmith; lme4), ICC 0.4185; Kish's
    design effect 1 + 4·ICC."""
    found = effective_number(
        np.ravel(DYESTUFF), cells=[0] * 30, nuisance={"batch": np.repeat(np.arange(6), 5)}
    )
    icc = 1764.05 / (1764.05 + 2451.25)
    assert found.detail["icc batch"] == pytest.approx(icc, abs=0.01)
    assert 30 * found.parts["batch"] == pytest.approx(30 / (1 + 4 * icc), rel=0.02)


@pytest.mark.parametrize("phi", [-0.5, 0.3, 0.9, 0.99])
def test_inflation_of_a_mean_by_its_double_sum(phi):
    """Bayley & Hammersley (1946): Σ_ij φ^|i−j| / n, for one cell and for two cells in random order."""
    rng = np.random.default_rng(5)
    n = 400
    for cell, tolerance in ((np.zeros(n, dtype=int), 1e-2), (rng.integers(0, 2, n), 5e-2)):
        correlation = toeplitz(phi ** np.arange(n))
        count = np.bincount(cell)
        exact = [correlation[np.ix_(cell == c, cell == c)].sum() / count[c] for c in range(len(count))]
        pairs = same_cell_pairs(cell, len(count), along_order(n), lags_needed(phi, n))
        found = inflation(np.array([phi]), pairs, count.astype(float), n)[0]
        assert found == pytest.approx(exact, rel=tolerance)


def test_equivalence_by_statsmodels():
    """On independent runs the verdict is that of statsmodels' two one-sided tests, away from the limit."""
    from statsmodels.stats.weightstats import ttost_ind

    rng = np.random.default_rng(6)
    a, b = rng.standard_normal(200), rng.standard_normal(200)
    values, cells = np.ravel(np.column_stack((a, b))), np.tile([0, 1], 200)
    found = contrast(values, cells=cells, a=0, b=1)
    for margin in (0.1, 0.2, 0.4, 0.5):
        p = ttost_ind(b, a, -margin, margin, usevar="unequal")[0]
        if not 0.02 < p < 0.1:
            assert (verdict(found, margin) == "within the margin") == (p < 0.05)


def column(folder, name):
    with (folder / "campaigns" / name).open(encoding="utf-8") as source:
        rows = list(csv.DictReader(source))
    if "started" in rows[0]:
        rows.sort(key=lambda row: dt.datetime.fromisoformat(row["started"]))
    return rows


def numbers(rows, name="value"):
    return np.array([float(row[name]) for row in rows])


def near(found, figure):
    """Within a factor of two, or inside the interval."""
    inside = found.n * (1 - found.loss_high) <= figure <= found.n * (1 - found.loss_low)
    return inside or figure / 2 <= found.n_effective <= 2 * figure


def test_measured_host_effect(shared_folder):
    """Three machines, one of which stepped: Syscall_Basic is worth about 3 runs (measured independently of
    this project)."""
    rows = [
        row for row in column(shared_folder, "azure_host_effect.csv") if row["benchmark"] == "Syscall_Basic"
    ]
    found = effective_number(
        numbers(rows), cells=[0] * len(rows), nuisance={"host": [row["host"] for row in rows]}
    )
    assert near(found, 3)
    assert abs(found.detail["phi"]) < 0.2  # the step is not autocorrelation
    assert found.detail["icc host"] == pytest.approx(0.984, abs=0.03)


def test_measured_step_of_one_host(shared_folder):
    """The machine …-long-1 steps at its run 32 of Syscall_Basic."""
    rows = [
        row
        for row in column(shared_folder, "azure_host_effect.csv")
        if row["benchmark"] == "Syscall_Basic" and row["host"].endswith("long-1")
    ]
    assert segments(numbers(rows))[1] in {31, 32}


def test_measured_mild_host_effect(shared_folder):
    """Memcpy_1MB: ICC 0.033 by host, no dependence in time worth a hundredth."""
    rows = [row for row in column(shared_folder, "azure_host_effect.csv") if row["benchmark"] == "Memcpy_1MB"]
    found = effective_number(
        numbers(rows), cells=[0] * len(rows), nuisance={"host": [row["host"] for row in rows]}
    )
    assert found.detail["icc host"] == pytest.approx(0.033, abs=0.005)
    assert found.parts["serial"] > 0.99


def test_measured_daily_cycle(shared_folder):
    """n_eff in time about 54 of 10,401 by Geyer's sequence within hosts: the hosts' own numbers together."""
    rows = column(shared_folder, "azure_daily_cycle.csv")
    host = np.array([row["host"] for row in rows])
    values = numbers(rows)
    together = sum(
        effective_number(values[host == h], cells=[0] * int((host == h).sum())).n_effective
        for h in np.unique(host)
    )
    assert 27 <= together <= 108


def test_measured_independent_runs(shared_folder):
    """11,869 machines, one run each: n_eff 11,630 in time, and the host effect said to be unknown."""
    rows = column(shared_folder, "azure_independent.csv")
    found = effective_number(
        numbers(rows), cells=[0] * len(rows), nuisance={"host": [row["host"] for row in rows]}
    )
    assert near(found, 11_630)
    assert found.loss_low < 0.1
    assert any("one run a level" in remark for remark in found.remarks)


@pytest.mark.parametrize(("response", "figure"), [("fio_4k_seq_write_iops", 60), ("md_sim_duration_s", 174)])
def test_measured_machines_of_three_runs(shared_folder, response, figure):
    """174 runs on m3.large, three a machine: fio is worth about 60, MD all of them."""
    rows = [
        row
        for row in column(shared_folder, "ec2_vm_iterations.csv")
        if row["source"].endswith("m3.large") and row[response]
    ]
    found = effective_number(
        numbers(rows, response),
        cells=[row["source"] for row in rows],
        nuisance={"host": [row["host"] for row in rows]},
    )
    assert near(found, figure)
