"""What dependence within clusters costs a mean, against a published survey."""

import math

import numpy as np
import pytest

from auditd.stats import cluster_covariance, one_way


def _school_variance(columns):
    """Variance of the mean of 183 schools in 15 of 757 districts, one stage, without replacement."""
    district, score = columns("survey_apiclus1.csv", "dnum", "api00")
    n, k = score.size, 15
    residuals = score - score.mean()
    design = np.ones((n, 1))
    # The survey package's factor is k/(k − 1) alone; with one column ours times (n − 1)/(n − 1) is the
    # same.
    variance = float(cluster_covariance(residuals, design, district)[0, 0]) * (1 - k / 757)
    return score, variance


def test_mean_of_a_cluster_sample(columns):
    """R survey, svymean(~api00, dclus1): mean 644.17, SE 23.542 (published)."""
    score, variance = _school_variance(columns)
    assert score.mean() == pytest.approx(644.17, abs=0.0058)
    assert math.sqrt(variance) == pytest.approx(23.542, abs=0.00055)


def test_design_effect_of_a_cluster_sample(columns):
    """Same source: DEff 9.3459 against simple random sampling without replacement (recalled, reproduced).

    The population's size is the sum of weights, 6194.
    """
    score, variance = _school_variance(columns)
    weight = columns("survey_apiclus1.csv", "weight")
    simple = score.var(ddof=1) / score.size
    assert variance / (simple * (1 - score.size / weight.sum())) == pytest.approx(9.3459, abs=5.8e-5)
    assert variance / simple == pytest.approx(9.0697, abs=5.8e-5)


def test_model_based_design_effect_is_of_that_size(columns):
    """Kish's 1 + (Σnᵢ²/n − 1)·icc of the same schools lies within a factor of two of the sample's own."""
    district, score = columns("survey_apiclus1.csv", "dnum", "api00")
    assert 9.07 / 2 < one_way(score, district).design_effect < 9.07 * 2


def test_design_effect_is_the_variance_ratio():
    """With effects of known variance, the mean's variance over 4,000 trials exceeds the naive one as Kish
    says.
    """
    rng = np.random.default_rng(17)
    sizes = np.array([2, 3, 5, 10, 20])
    group = np.repeat(np.arange(5), sizes)
    effects = rng.normal(size=(4000, 5)) * math.sqrt(0.3)
    x = effects[:, group] + rng.normal(size=(4000, 40)) * math.sqrt(0.7)
    expected = 1 + (float(sizes @ sizes) / 40 - 1) * 0.3
    assert 40 * x.mean(axis=1).var() == pytest.approx(expected, rel=0.08)
    tables = [one_way(row, group) for row in x[:400]]
    assert np.mean([t.between for t in tables]) == pytest.approx(0.3, abs=0.06)
    covered = [t.icc_low <= 0.3 <= t.icc_high for t in tables]
    assert abs(np.mean(covered) - 0.95) < 3 * (0.95 * 0.05 / 400) ** 0.5
