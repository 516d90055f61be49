"""Variance components against published tables: one factor directly, nested and crossed designs by their
squares.

In a balanced design whose estimates are positive, REML solves the same equations as mean squares set equal
to their expectations (Searle, Casella & McCulloch 1992, 3.8), so the published REML figures follow from
`one_way`'s squares.
"""

import math

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.stats import chi2
from scipy.stats import f as f_law

from auditd.stats import one_way, variance_components

# Davies & Goldsmith (1972), Table 6.1: yield of dyestuff, 6 batches × 5.
DYESTUFF = (
    (1545, 1440, 1440, 1520, 1580), (1540, 1555, 1490, 1560, 1495), (1595, 1550, 1605, 1510, 1560),
    (1445, 1440, 1595, 1465, 1545), (1595, 1630, 1515, 1635, 1625), (1520, 1455, 1450, 1480, 1445),
)  # fmt: skip


def test_dyestuff_typed_in():
    """R lme4, example(Dyestuff), REML: 1764.05 and 2451.25 (recalled figure, reproduced); F 4.598266."""
    x, batch = np.ravel(DYESTUFF), np.repeat(np.arange(6), 5)
    result = variance_components(x, batch)
    assert (result.between, result.within) == pytest.approx((1764.05, 2451.25), rel=1e-12)
    table = one_way(x, batch)
    assert (table.between, table.within) == pytest.approx((1764.05, 2451.25), rel=1e-12)
    assert table.statistic == pytest.approx(4.598266, abs=5e-7)
    assert table.pvalue == pytest.approx(0.004398, abs=5e-7)


def test_dyestuff_from_the_shared_copy(columns):
    """The same from the reference folder, within the printed digits."""
    result = variance_components(*columns("lme4_dyestuff.csv", "Yield", "Batch"))
    assert (result.between, result.within) == pytest.approx((1764.05, 2451.25), abs=0.0058)


def test_batches_of_determinations(columns):
    """NIST e-Handbook 7.4.4: components 11.711111 and 1.8 (published), by mean squares and by REML."""
    batch, y = columns("eh_batches744.csv", "batch", "y")
    for result in (one_way(y, batch), variance_components(y, batch)):
        assert result.between == pytest.approx(11.711111, abs=5.5e-7)
        assert result.within == pytest.approx(1.8, abs=1e-12)


def test_interval_of_batches(columns):
    """Same source: 95 % intervals 3.456828–101.096603 (between, Williams–Tukey) and 0.87877–5.543625
    (within).
    """
    batch, y = columns("eh_batches744.csv", "batch", "y")
    table = one_way(y, batch)
    ends = []
    for q in (0.975, 0.025):
        shrunk = table.square_between * (1 - f_law.ppf(q, *table.df) / table.statistic)
        ends.append(shrunk / (3 * chi2.ppf(q, table.df[0])))
    ends += [table.square_within / chi2.ppf(q, table.df[1]) for q in (0.975, 0.025)]
    assert ends[:2] == pytest.approx([3.456828, 101.096603], abs=5.5e-7)
    assert ends[2] == pytest.approx(0.87877, abs=5.8e-6)
    assert ends[3] == pytest.approx(5.543625, abs=5.5e-7)


def test_precision_of_a_measurement_procedure(columns):
    """CLSI EP05-A3 data in R package VCA's vignette, y ~ day/run (published, six decimals)."""
    day, run, y = columns("vca_ep05a2_3.csv", "day", "run", "y")
    days, runs = one_way(y, day), one_way(y, day * 10 + run)
    squares = (days.square_between, runs.square_between - days.square_between, runs.square_within)
    df = (days.df[0], runs.df[0] - days.df[0], runs.df[1])
    ms = [s / d for s, d in zip(squares, df, strict=True)]
    parts = [(ms[0] - ms[1]) / 4, (ms[1] - ms[2]) / 2, ms[2]]
    total = sum(parts)
    # Satterthwaite: the total is MSday/4 + MSrun/4 + MSerror/2.
    weights = (0.25, 0.25, 0.5)
    total_df = total**2 / sum((w * m) ** 2 / d for w, m, d in zip(weights, ms, df, strict=True))
    assert squares == pytest.approx((1506.145222, 606.928138, 651.360839), abs=5.5e-7)
    assert (*parts, total) == pytest.approx((12.231099, 7.031193, 16.284021, 35.546313), abs=5.5e-7)
    assert total_df == pytest.approx(50.129098, abs=5.5e-7)
    limits = [d * v / chi2.ppf(q, d) for v, d in ((total, total_df), (parts[2], 40)) for q in (0.975, 0.025)]
    assert limits == pytest.approx([24.8957, 54.8935, 10.9764, 26.659], abs=5.8e-5)
    doubled = [2 * m * m / d for m, d in zip(ms, df, strict=True)]
    variances = [(doubled[0] + doubled[1]) / 16, (doubled[1] + doubled[2]) / 4, doubled[2]]
    assert variances == pytest.approx([47.0968, 26.3372, 13.2585], abs=5.8e-5)
    upper = [v + 1.959964 * math.sqrt(s) for v, s in zip(parts[:2], variances[:2], strict=True)]
    assert upper == pytest.approx([25.6818, 17.0897], abs=5.8e-5)


def test_lithography_nested(columns):
    """NIST e-Handbook 6.6.1.3: SS 127.40293, 25.52089, 63.17865; components .2645, .05, .1755 (recalled)."""
    cassette, wafer, width = columns("eh_lithography.csv", "cassette", "wafer", "linewidth")
    cassettes, wafers = one_way(width, cassette), one_way(width, cassette * 10 + wafer)
    squares = (
        cassettes.square_between, wafers.square_between - cassettes.square_between, wafers.square_within,
    )  # fmt: skip
    ms = [s / d for s, d in zip(squares, (29, 60, 360), strict=True)]
    assert squares == pytest.approx((127.40293, 25.52089, 63.17865), abs=5.8e-6)
    assert (ms[0] - ms[1]) / 15 == pytest.approx(0.2645, abs=5.8e-5)
    assert (ms[1] - ms[2]) / 5 == pytest.approx(0.05, abs=0.0058)
    assert ms[2] == pytest.approx(0.1755, abs=5.8e-5)


def test_penicillin_crossed(columns):
    """R lme4, example(Penicillin), REML: sd .8467 (plate), 1.9316 (sample), .5499 (residual); published."""
    plate, sample, y = columns("lme4_penicillin.csv", "plate", "sample", "diameter")
    plates, samples = one_way(y, plate), one_way(y, sample)
    error = (plates.square_within - samples.square_between) / (23 * 5)
    sds = [
        math.sqrt((plates.square_between / 23 - error) / 6),
        math.sqrt((samples.square_between / 5 - error) / 24),
        math.sqrt(error),
    ]
    assert sds == pytest.approx([0.8467, 1.9316, 0.5499], abs=5.8e-5)


def test_machines_and_workers(columns):
    """Pinheiro & Bates (2000), fm2Machine: sd 4.781, 3.7294, .96158 (recalled figure, reproduced)."""
    worker, machine, score = columns("nlme_machines.csv", "Worker", "Machine", "score")
    cell = [f"{w:.0f}{m}" for w, m in zip(worker, machine, strict=True)]
    workers, machines, cells = one_way(score, worker), one_way(score, machine), one_way(score, cell)
    both = cells.square_between - workers.square_between - machines.square_between
    ms_workers, ms_both, error = workers.square_between / 5, both / 10, cells.square_within / 36
    assert math.sqrt((ms_workers - ms_both) / 9) == pytest.approx(4.781, abs=0.00055)
    assert math.sqrt((ms_both - error) / 3) == pytest.approx(3.7294, abs=0.00015)
    assert math.sqrt(error) == pytest.approx(0.96158, abs=5.8e-6)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_unequal_groups_agree_with_mixed_models(seed):
    """statsmodels' MixedLM (REML) has no higher likelihood than ours, and the same components to its
    tolerance.
    """
    rng = np.random.default_rng(seed)
    group = np.repeat(np.arange(12), rng.integers(1, 14, 12))
    x = 3.0 + rng.normal(size=group.size) + 1.5 * rng.normal(size=12)[group]
    ours = variance_components(x, group)
    fit = sm.MixedLM(x, np.ones(group.size), groups=group).fit(reml=True, method=["powell", "lbfgs"])
    assert ours.between == pytest.approx(float(fit.cov_re[0, 0]), rel=1e-3)
    assert ours.within == pytest.approx(float(fit.scale), rel=1e-3)
    assert ours.mean == pytest.approx(float(fit.fe_params[0]), rel=1e-4)


def test_boundary_estimate_is_zero_between():
    """Box & Tiao (1973), lme4's Dyestuff2 design: groups more alike than chance give 0 and the pooled
    variance.
    """
    x = np.tile([1.0, 2.0, 3.0, 4.0], 5) + np.repeat([0.0, 0.1, -0.1, 0.05, 0.0], 4)
    result = variance_components(x, np.repeat(np.arange(5), 4))
    assert result.between == 0.0
    assert result.within == pytest.approx(np.var(x, ddof=1), rel=1e-12)


def test_dyestuff2_of_the_textbook(shared_folder):
    """R lme4, example(Dyestuff2), REML: batch variance 0, residual 13.81, i.e. sd 3.7157 (from memory,
    reproduced).
    """
    path = shared_folder / "reference" / "more" / "lme4_dyestuff2.csv"
    table = np.genfromtxt(path, delimiter=",", skip_header=1, dtype=None, encoding="utf-8")
    result = variance_components(table["f1"], table["f0"])
    assert result.between == 0.0
    assert math.sqrt(result.within) == pytest.approx(3.7157, abs=5e-5)
