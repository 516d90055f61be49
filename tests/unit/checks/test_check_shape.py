"""Shape and spread: a family of its own, with the remark whether they matter here."""

import numpy as np
import pytest
from series_made import series

from auditd.checks.full_audit import audit_series
from auditd.checks.shape_normality import ShapeNormality
from auditd.checks.view import whole
from auditd.stats import brown_forsythe


def shapes(values, cells=None):
    answers, _ = audit_series(series(values, cells=cells))
    return {one.check: one for one in answers if one.family == "shape"}


def test_normal_cells_of_unequal_spread_are_normal():
    """Each cell's residuals are normal: unequal spread is told as spread, and not as shape."""
    rng = np.random.default_rng(1)
    cells = np.arange(800) % 2
    found = shapes(rng.normal(size=800) * np.where(cells == 0, 1, 4), cells)
    assert found["anderson_darling"].verdict == "no evidence"
    assert found["brown_forsythe"].verdict == "departure"
    assert found["brown_forsythe"].effect.low < 4 < found["brown_forsythe"].effect.high


def test_the_spread_statistic_is_the_librarys():
    """On cells with the means taken off the statistic is Brown and Forsythe's."""
    rng = np.random.default_rng(2)
    cells = np.arange(120) % 3
    x = rng.normal(size=120) + cells
    assert shapes(x, cells)["brown_forsythe"].statistic == pytest.approx(brown_forsythe(x, cells).statistic)


def test_skewed_results_matter_in_small_cells_and_little_in_large_ones():
    """Lognormal results are a departure; it matters with 20 runs, and little with 5,000."""
    rng = np.random.default_rng(3)
    few, many = rng.lognormal(size=40), rng.lognormal(0, 0.5, size=10_000)
    small = shapes(few, np.arange(40) % 2)["anderson_darling"]
    large = shapes(many, np.arange(10_000) % 2)["anderson_darling"]
    assert small.reason.startswith("matters for intervals")
    assert large.verdict == "departure"
    assert large.reason.startswith("matters little")
    assert "central limit theorem" in large.reason


def test_unequal_sizes_make_unequal_spread_matter():
    """Cells of alike sizes: matters little; of unequal ones: Welch's test instead of a pooled one."""
    rng = np.random.default_rng(4)
    alike = shapes(rng.normal(size=100), np.arange(100) % 2)["brown_forsythe"]
    unequal = shapes(rng.normal(size=100), (np.arange(100) < 10).astype(int))["brown_forsythe"]
    assert alike.reason.startswith("matters little")
    assert unequal.reason.startswith("matters for pooled")
    assert "Welch" in unequal.reason


def test_one_cell_has_no_spread_to_compare():
    """One cell: not testable."""
    found = shapes(np.random.default_rng(5).normal(size=50))["brown_forsythe"]
    assert found.verdict == "not testable"


def test_one_run_a_cell_has_no_residuals():
    """A cell for every run: nothing is testable, and nothing is passed as clean."""
    answers, _ = audit_series(series(np.random.default_rng(6).normal(size=50), cells=np.arange(50)))
    assert {one.verdict for one in answers} == {"not testable"}


def test_the_kurtosis_interval_has_its_coverage():
    """Excess kurtosis of a logistic law is 6/5; 95 % of 100 intervals hold it (binomial 0.1 %)."""
    held = 0
    for seed in range(100):
        found = ShapeNormality().ask(whole(series(np.random.default_rng(seed).logistic(size=10_000))))
        held += found.effect.low < 1.2 < found.effect.high
    assert held >= 87
