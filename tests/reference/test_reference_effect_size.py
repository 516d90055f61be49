"""Hedges's g and equivalence tests against published values."""

import math

import numpy as np
import pingouin
import pytest
from scipy.stats import chi2, nct
from statsmodels.stats.weightstats import ttost_ind

from auditd.stats import equivalence, hedges_g

# Henderson & Velleman (1981), Biometrics 37:391-411, as in R's mtcars: miles per gallon, automatic and
# manual.
AUTOMATIC = (
    21.4, 18.7, 18.1, 14.3, 24.4, 22.8, 19.2, 17.8, 16.4, 17.3, 15.2, 10.4, 10.4, 14.7, 21.5, 15.5, 15.2,
    13.3, 19.2,
)  # fmt: skip
MANUAL = (21.0, 21.0, 22.8, 32.4, 30.4, 33.9, 27.3, 26.0, 30.4, 15.8, 19.7, 15.0, 21.4)


def _sample(n, mean, sd):
    """n values with exactly this mean and standard deviation."""
    z = np.arange(n) - (n - 1) / 2
    return mean + sd * z / z.std(ddof=1)


def test_hospital_stays(columns):
    """R metafor, escalc("SMD", dat.normand1999): g and its variance by Hedges (1982), eq. 8 (published)."""
    table = columns("normand1999.csv", "n1", "m1", "sd1", "n2", "m2", "sd2")
    results = []
    for n1, m1, s1, n2, m2, s2 in zip(*table, strict=True):
        results.append(hedges_g(_sample(int(n1), m1, s1), _sample(int(n2), m2, s2)))
    for got, expected, tolerance in zip(
        [r.g for r in results],
        (-0.3552, -0.3479, -2.3176, -1.888),
        (5.8e-5, 5.8e-5, 5.8e-5, 5.5e-4),
        strict=True,
    ):
        assert got == pytest.approx(expected, abs=tolerance)
    assert [r.variance for r in results] == pytest.approx([0.0131, 0.0645, 0.0458, 0.1606], abs=5.8e-5)


def test_worked_example_of_a_textbook():
    """Borenstein et al. (2009), ch. 4: d .597, J .9923, g .5924, V .0412, SE .203 (from memory,
    reproduced).
    """
    result = hedges_g(_sample(50, 103, 5.5), _sample(50, 100, 4.5))
    variance_d = 1 / 50 + 1 / 50 + result.d**2 / 200
    variance_g = result.correction**2 * variance_d
    assert result.d == pytest.approx(0.597, abs=0.00055)
    assert variance_d == pytest.approx(0.0418, abs=5.8e-5)
    assert result.correction == pytest.approx(0.9923, abs=5.8e-5)
    assert result.g == pytest.approx(0.5924, abs=5.8e-5)
    assert variance_g == pytest.approx(0.0412, abs=6.3e-5)
    assert math.sqrt(variance_g) == pytest.approx(0.203, abs=0.00055)


def test_fuel_by_transmission():
    """R effectsize, mpg ~ am in mtcars: d −1.48 with noncentral-t interval −2.27 to −0.67, g −1.44
    (published).

    That package also shortens the interval by J; it is then one for no parameter, and is not taken over.
    """
    result = hedges_g(AUTOMATIC, MANUAL)
    assert result.d == pytest.approx(-1.48, abs=0.0051)
    assert (result.low, result.high) == pytest.approx((-2.27, -0.67), abs=0.0051)
    assert result.g == pytest.approx(-1.44, abs=0.0051)


def test_correction_is_exact():
    """Hedges (1981), Table 1, c(m): .5642 at 2 df, .7236 at 3, .7979 at 4, .9228 at 10 (from memory,
    reproduced).
    """
    expected = {2: 0.5642, 3: 0.7236, 4: 0.7979, 10: 0.9228}
    for df, c in expected.items():
        x = np.arange(df, dtype=float)
        assert hedges_g(x, [0.0, 1.0]).correction == pytest.approx(c, abs=6e-5)


@pytest.mark.parametrize(("n_a", "n_b", "shift"), [(3, 3, 0.0), (5, 40, 1.0), (300, 200, 0.3), (15, 15, 6.0)])
def test_interval_ends_where_the_law_says(n_a, n_b, shift):
    """At the interval's ends the observed t stands at the 97.5 % and 2.5 % points of the noncentral t."""
    rng = np.random.default_rng(n_a)
    a, b = rng.normal(shift, 1, n_a), rng.normal(0, 1, n_b)
    result = hedges_g(a, b)
    step = math.sqrt(1 / n_a + 1 / n_b)
    at = [nct.cdf(result.d / step, result.df, end / step) for end in (result.low, result.high)]
    assert at == pytest.approx([0.975, 0.025], abs=1e-8)


def test_large_samples_join_the_normal_law():
    """At 20,000 values the interval is that of the normal law d ± 1.96·√(1/n₁ + 1/n₂ + d²/2n) to 1e-3 of
    its width.
    """
    result = hedges_g(_sample(10_000, 0.5, 1), _sample(10_000, 0, 1))
    half = 1.959964 * math.sqrt(2e-4 + 0.25 / 40_000)
    assert (result.low, result.high) == pytest.approx((0.5 - half, 0.5 + half), abs=2e-3 * half)


@pytest.mark.parametrize("n", [2, 4, 30])
def test_huge_differences_have_the_law_of_the_deviation(n):
    """With a difference of 1e6 deviations only the pooled deviation is uncertain: limits follow
    chi-squared.
    """
    result = hedges_g(_sample(n, 1e6, 1), _sample(n, 0, 1))
    ends = [result.d * math.sqrt(chi2.ppf(q, result.df) / result.df) for q in (0.025, 0.975)]
    assert (result.low, result.high) == pytest.approx(ends, rel=1e-5)


def test_agrees_with_pingouin():
    """pingouin's compute_effsize gives the same d, and g to its approximate correction."""
    result = hedges_g(AUTOMATIC, MANUAL)
    assert result.d == pytest.approx(pingouin.compute_effsize(AUTOMATIC, MANUAL, eftype="cohen"), rel=1e-12)
    assert result.g == pytest.approx(pingouin.compute_effsize(AUTOMATIC, MANUAL, eftype="hedges"), rel=1e-3)


# statsmodels' test suite, values from R's equivalence packages (published): margin 0.6.
CLINIC = (
    ("var1", False, 0.1646666666666667, 0.2531625991083627, 26.7484787582315,
     -0.2666862980722534, 0.596019631405587, 0.04853083976236974),
    ("var2", False, 0.562666666666666, 0.2149871904637392, 24.11000151062728,
     0.194916250699966, 0.930417082633366, 0.4317936812594803),
    ("var1", True, 0.1646666666666667, None, 28, -0.2659960620757337, 0.595329395409067, 0.04827315100761467),
)  # fmt: skip


@pytest.mark.parametrize(("column", "pooled", "difference", "error", "df", "low", "high", "p"), CLINIC)
def test_clinic(columns, column, pooled, difference, error, df, low, high, p):
    """Difference, standard error, degrees of freedom, 90 % interval and p of the two one-sided tests."""
    group, x = columns("tost_clinic.csv", "group", column)
    result = equivalence(x[group == 1], x[group == 2], 0.6, pooled=pooled)
    assert result.estimate == pytest.approx(difference, abs=1.7e-10)
    if error is not None:
        assert result.standard_error == pytest.approx(error, abs=2.3e-10)
    assert result.df == pytest.approx(df, abs=2.6e-8)
    assert (result.low, result.high) == pytest.approx((low, high), abs=2.1e-10)
    assert result.pvalue == pytest.approx(p, abs=4.9e-11)
    assert result.equivalent == (p <= 0.05)


@pytest.mark.parametrize(("pooled", "use_var"), [(True, "pooled"), (False, "unequal")])
def test_agrees_with_statsmodels(pooled, use_var):
    """statsmodels' ttost_ind gives the same two p-values on mtcars with a margin of 10."""
    result = equivalence(AUTOMATIC, MANUAL, 10.0, pooled=pooled)
    p, lower, upper = ttost_ind(AUTOMATIC, MANUAL, -10.0, 10.0, usevar=use_var)
    assert result.pvalue == pytest.approx(p, rel=1e-9)
    assert (result.pvalue_lower, result.pvalue_upper) == pytest.approx((lower[1], upper[1]), rel=1e-9)
    assert (result.estimate > 0) == (np.mean(AUTOMATIC) > np.mean(MANUAL))
