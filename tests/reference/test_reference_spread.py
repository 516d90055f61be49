"""Equality of variances against published values."""

import numpy as np
import pingouin
import pytest
import scipy.stats

from auditd.stats import bartlett, brown_forsythe, levene

# Beall (1942), Biometrika 32:243-262, as in R's InsectSprays: counts of insects under six sprays.
INSECT_SPRAYS = {
    "A": (10, 7, 20, 14, 14, 12, 10, 23, 17, 20, 14, 13),
    "B": (11, 17, 21, 11, 16, 14, 17, 17, 19, 21, 7, 13),
    "C": (0, 1, 7, 2, 3, 1, 2, 1, 3, 0, 1, 4),
    "D": (3, 5, 12, 6, 4, 3, 5, 5, 5, 5, 2, 4),
    "E": (3, 5, 3, 5, 3, 6, 1, 1, 3, 2, 6, 4),
    "F": (11, 9, 15, 22, 15, 16, 13, 10, 26, 26, 24, 13),
}
COUNTS = np.array([c for counts in INSECT_SPRAYS.values() for c in counts])
SPRAYS = [spray for spray, counts in INSECT_SPRAYS.items() for _ in counts]


def test_gear_by_median(columns):
    """NIST e-Handbook 1.3.5.10, GEAR.DAT: W 1.70591, p .0991 (published; the program's default is the
    median).
    """
    batch, diameter = columns("eh_gear.csv", "batch", "diameter")
    result = brown_forsythe(diameter, batch)
    assert result.statistic == pytest.approx(1.70591, abs=8.1e-6)
    assert result.pvalue == pytest.approx(0.0991, abs=5.8e-5)
    assert result.df == (9, 90)


def test_gear_by_mean(columns):
    """R car, leveneTest(center = mean) on GEAR.DAT: 2.15945985647285, p .032236826559783 (published)."""
    batch, diameter = columns("eh_gear.csv", "batch", "diameter")
    result = levene(diameter, batch)
    assert result.statistic == pytest.approx(2.15945985647285, abs=2.2e-9)
    assert result.pvalue == pytest.approx(0.032236826559783, abs=3.4e-11)


@pytest.mark.parametrize(
    ("file", "column", "expected", "tolerance"),
    [("eh_randwalk.csv", "y", 10.459, 0.00055), ("eh_dziuba1.csv", "resistance", 140.85, 0.0058)],
)
def test_spread_over_four_quarters(columns, file, column, expected, tolerance):
    """NIST e-Handbook 1.4.2.3 and 1.4.2.7: W about medians of four consecutive quarters (recalled,
    reproduced).
    """
    x = columns(file, column)
    quarter = np.repeat(np.arange(4), x.size // 4)
    assert brown_forsythe(x, quarter).statistic == pytest.approx(expected, abs=tolerance)


def test_gear_by_bartlett(columns):
    """NIST e-Handbook 1.3.5.7, GEAR.DAT: T 20.7858, p .0136358632781 on 9 df (recalled, reproduced)."""
    batch, diameter = columns("eh_gear.csv", "batch", "diameter")
    result = bartlett(diameter, batch)
    assert result.statistic == pytest.approx(20.7858, abs=8.2e-5)
    assert result.pvalue == pytest.approx(0.0136358632781, abs=1.4e-11)
    assert result.df == 9


def test_insect_sprays_by_bartlett():
    """R, example(bartlett.test): K-squared 25.9598, df 5, p 9.085e-05 (published), of whole numbers."""
    result = bartlett(COUNTS, SPRAYS)
    assert result.statistic == pytest.approx(25.9598, abs=5.5e-5)
    assert result.pvalue == pytest.approx(9.085e-5, abs=5.5e-9)
    assert result.df == 5


def test_speed_of_light(columns):
    """Michelson's five experiments: Bartlett's T and W about medians (computed independently)."""
    experiment, speed = columns("morley.csv", "Expt", "Speed")
    assert bartlett(speed, experiment).statistic == pytest.approx(11.551764981901371, abs=1.2e-8)
    assert brown_forsythe(speed, experiment).statistic == pytest.approx(1.6749389829152164, abs=1.7e-9)


def test_documented_levene_of_pingouin():
    """pingouin's documentation of `homoscedasticity`: 1.173518, p .310707 (median); 1.572239, p .209303
    (mean).
    """
    frame = pingouin.read_dataset("mediation")[["X", "Y", "M"]]
    x, which = frame.to_numpy().ravel(), np.tile(np.arange(3), len(frame))
    by_median, by_mean = brown_forsythe(x, which), levene(x, which)
    assert (by_median.statistic, by_median.pvalue) == pytest.approx((1.173518, 0.310707), abs=5.5e-7)
    assert (by_mean.statistic, by_mean.pvalue) == pytest.approx((1.572239, 0.209303), abs=5.5e-7)


def test_agree_with_scipy_on_unequal_sizes():
    """scipy's levene and bartlett give the same on groups of 5, 8, 13 and 34 values, even and odd."""
    rng = np.random.default_rng(7)
    parts = [rng.exponential(scale, size) for scale, size in ((1, 5), (2, 8), (1, 13), (3, 34))]
    x, group = np.concatenate(parts), np.repeat(np.arange(4), [p.size for p in parts])
    pairs = (
        (brown_forsythe(x, group), scipy.stats.levene(*parts, center="median")),
        (levene(x, group), scipy.stats.levene(*parts, center="mean")),
        (bartlett(x, group), scipy.stats.bartlett(*parts)),
    )
    for ours, theirs in pairs:
        assert (ours.statistic, ours.pvalue) == pytest.approx((theirs.statistic, theirs.pvalue), rel=1e-10)
