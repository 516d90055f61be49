"""Welch's analysis of variance against published values."""

import numpy as np
import pingouin
import pytest
from statsmodels.stats.oneway import anova_oneway

from auditd.stats import welch_anova

# Student (1908), Biometrika 6:1-25, as in R's sleep: extra hours under two drugs.
SLEEP = (
    (0.7, -1.6, -0.2, -1.2, -0.1, 3.4, 3.7, 0.8, 0.0, 2.0),
    (1.9, 0.8, 1.1, 0.1, -0.1, 4.4, 5.5, 1.6, 4.6, 3.4),
)
# Beall (1942), Biometrika 32:243-262, as in R's InsectSprays.
SPRAYED = (
    (10, 7, 20, 14, 14, 12, 10, 23, 17, 20, 14, 13), (11, 17, 21, 11, 16, 14, 17, 17, 19, 21, 7, 13),
    (0, 1, 7, 2, 3, 1, 2, 1, 3, 0, 1, 4), (3, 5, 12, 6, 4, 3, 5, 5, 5, 5, 2, 4),
    (3, 5, 3, 5, 3, 6, 1, 1, 3, 2, 6, 4), (11, 9, 15, 22, 15, 16, 13, 10, 26, 26, 24, 13),
)  # fmt: skip


def test_insect_sprays():
    """R, oneway.test(count ~ spray, InsectSprays): F 36.065, 5 and 30.043 df, p 7.999e-12 (published
    output).
    """
    result = welch_anova(np.ravel(SPRAYED), np.repeat(np.arange(6), 12))
    assert result.statistic == pytest.approx(36.065, abs=5.5e-4)
    assert result.df == pytest.approx((5, 30.043), abs=5.5e-4)
    assert result.pvalue == pytest.approx(7.999e-12, abs=5.5e-16)


def test_two_groups_are_welchs_t():
    """R, t.test(extra ~ group, sleep): t −1.8608, df 17.776, p .07939 (published output); F is its square."""
    result = welch_anova(np.ravel(SLEEP), np.repeat([1, 2], 10))
    assert result.statistic**0.5 == pytest.approx(1.8608, abs=5.5e-5)
    assert result.df == pytest.approx((1, 17.776), abs=5.5e-4)
    assert result.pvalue == pytest.approx(0.07939, abs=5.5e-6)


def test_pain_by_hair_colour():
    """pingouin's documentation of `welch_anova`: F 5.890115, 3 and 8.329841 df, p .018813."""
    frame = pingouin.read_dataset("anova")
    result = welch_anova(frame["Pain threshold"].to_numpy(), frame["Hair color"].to_numpy())
    assert result.statistic == pytest.approx(5.890115, abs=5.5e-7)
    assert result.df == pytest.approx((3, 8.329841), abs=5.5e-7)
    assert result.pvalue == pytest.approx(0.018813, abs=5.5e-7)


def test_agrees_with_statsmodels():
    """statsmodels' anova_oneway with unequal variances gives the same on sizes 4, 11 and 30."""
    rng = np.random.default_rng(11)
    parts = [rng.normal(m, s, n) for m, s, n in ((0, 1, 4), (1, 4, 11), (0.5, 2, 30))]
    ours = welch_anova(np.concatenate(parts), np.repeat([0, 1, 2], [4, 11, 30]))
    theirs = anova_oneway(parts, use_var="unequal")
    assert ours.statistic == pytest.approx(theirs.statistic, rel=1e-10)
    assert ours.pvalue == pytest.approx(theirs.pvalue, rel=1e-9)
