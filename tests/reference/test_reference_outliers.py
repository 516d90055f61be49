"""Grubbs's and Rosner's tests against published values."""

import numpy as np
import pytest

from auditd.stats import generalized_esd, grubbs
from auditd.stats.grubbs import critical_deviation

# Rosner (1983), Technometrics 25:165-172; also NIST e-Handbook 1.3.5.17.3.
ROSNER = (
    -0.25, 0.68, 0.94, 1.15, 1.20, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65, 1.69,
    1.70, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.10, 2.14, 2.15, 2.23, 2.24, 2.26, 2.35,
    2.37, 2.40, 2.47, 2.54, 2.62, 2.64, 2.90, 2.92, 2.92, 2.93, 3.21, 3.26, 3.30, 3.59, 3.68, 4.30, 4.64,
    5.34, 5.42, 6.01,
)  # fmt: skip
# The handbook's R and λ (recalled, reproduced; its last digits are truncated), and the tolerance of each.
R = (3.118, 2.942, 3.179, 2.810, 2.815, 2.848, 2.279, 2.310, 2.101, 2.067)
R_TOLERANCE = (0.001, 0.0011, 0.00055, 0.0058, 0.00061, 0.00055, 0.00055, 0.0058, 0.00061, 0.00055)
LAMBDA = (3.158, 3.151, 3.143, 3.136, 3.128, 3.120, 3.111, 3.103, 3.094, 3.085)
LAMBDA_TOLERANCE = (0.00088, 0.00055, 0.00099, 0.00055, 0.00055, 0.0058, 0.00084, 0.00055, 0.00055, 0.00055)
# Tietjen & Moore (1972), Technometrics 14:583-597: uranium isotope ratios.
URANIUM = (199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57)
# Grubbs (1969), Technometrics 11:1-21, Table 1: one-sided 5 % points (from memory, reproduced), and
# tolerances.
GRUBBS = (
    (3, 1.153, 0.00055), (4, 1.463, 0.00055), (5, 1.672, 0.00065), (6, 1.822, 0.00055), (7, 1.938, 0.00055),
    (8, 2.032, 0.00055), (9, 2.110, 0.0058), (10, 2.176, 0.00055), (12, 2.285, 0.00055), (15, 2.409, 0.00055),
    (20, 2.557, 0.00055), (25, 2.663, 0.00055), (30, 2.745, 0.00055), (40, 2.866, 0.0017), (50, 2.956,
    0.0011), (100, 3.207, 0.0028),
)  # fmt: skip


def _assert_rosner(x):
    result = generalized_esd(x, 10, 0.05)
    for got, expected, tolerance in zip(result.deviations, R, R_TOLERANCE, strict=True):
        assert got == pytest.approx(expected, abs=tolerance)
    for got, expected, tolerance in zip(result.critical, LAMBDA, LAMBDA_TOLERANCE, strict=True):
        assert got == pytest.approx(expected, abs=tolerance)
    # R₁ < λ₁ and R₂ < λ₂: a procedure that stops at the first says none.
    assert np.asarray(x)[list(result.outliers)].tolist() == [6.01, 5.42, 5.34]


def test_rosner_typed_in():
    """Rosner's 54 values: every R and λ of the handbook, and three outliers."""
    _assert_rosner(np.array(ROSNER))


def test_rosner_from_the_shared_copy(columns):
    """The same from the reference folder, in reversed order of the values."""
    _assert_rosner(columns("rosner1983.csv", "y")[::-1])


def test_uranium_typed_in():
    """NIST e-Handbook 1.3.5.17.1: G 2.468765, one-sided 5 % point 2.032 (from memory, reproduced)."""
    result = grubbs(URANIUM, 0.05, alternative="max")
    assert result.statistic == pytest.approx(2.468765, abs=5.5e-7)
    assert result.critical == pytest.approx(2.032, abs=0.00055)
    assert (result.index, result.outlier) == (7, True)
    assert grubbs(URANIUM).critical == pytest.approx(2.126645, abs=5.5e-7)


def test_uranium_from_the_shared_copy(columns):
    """The same from the reference folder."""
    result = grubbs(columns("tietjen_moore_u235.csv", "y"), 0.05, alternative="max")
    assert result.statistic == pytest.approx(2.468765, abs=5.5e-7)
    assert result.critical == pytest.approx(2.032, abs=0.00055)


@pytest.mark.parametrize(("n", "expected", "tolerance"), GRUBBS)
def test_critical_values(n, expected, tolerance):
    """Grubbs's Table 1, one-sided: also the two-sided point at twice the level."""
    x = np.random.default_rng(n).normal(size=n)
    assert grubbs(x, 0.05, alternative="max").critical == pytest.approx(expected, abs=tolerance)
    assert grubbs(x, 0.10).critical == grubbs(x, 0.05, alternative="max").critical


def test_pvalue_is_the_level_at_which_the_value_is_critical():
    """For both tests, asked again at the level p, the statistic stands exactly at its critical value."""
    x = np.array(ROSNER)
    for sides, result in ((2, grubbs(x)), (1, grubbs(x, alternative="max"))):
        assert critical_deviation(x.size, result.pvalue / sides) == pytest.approx(result.statistic, rel=1e-9)
    several = generalized_esd(x, 10)
    again = generalized_esd(x, 10, several.pvalue)
    assert again.critical[2] == pytest.approx(several.statistic, rel=1e-9)
    assert generalized_esd(x, 10, several.pvalue * 0.999).outliers == ()
    assert len(generalized_esd(x, 10, several.pvalue * 1.001).outliers) == 3


def test_deviations_agree_with_plain_recomputation():
    """Every R equals that of the values left, recomputed from scratch, with outliers a billion times
    larger.
    """
    rng = np.random.default_rng(3)
    x = np.concatenate((rng.normal(1e3, 1e-3, 60), [1e9, -1e9, 5e8]))
    left, plain = list(x), []
    for _ in range(8):
        values = np.array(left)
        z = np.abs(values - values.mean()) / values.std(ddof=1)
        plain.append(z.max())
        left.pop(int(z.argmax()))
    assert generalized_esd(x, 8).deviations == pytest.approx(plain, rel=1e-7)
