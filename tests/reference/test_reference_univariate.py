"""NIST StRD univariate summary statistics: the moments from which every test between groups is computed.

Source: NIST Statistical Reference Datasets, Univariate Summary Statistics, certified values. Tolerances are
what float64 can reach from the printed decimals.
"""

import math

import numpy as np
import pytest

from auditd.stats._groups import group_values

# name, certified mean, certified standard deviation, relative tolerance of the latter; all published
CERTIFIED = (
    ("lew", -177.435, 277.332168044316, 1e-12),
    ("mavro", 2.001856, 0.000429123454003053, 1e-12),
    ("michelso", 299.8524, 0.0790105478190518, 1e-12),
    ("numacc1", 10000002, 1, 1e-12),
    ("numacc2", 1.2, 0.1, 1e-12),
    ("numacc3", 1000000.2, 0.1, 1e-8),
    ("pidigits", 4.5348, 2.86733906028871, 1e-12),
)


def _moments(x):
    """Mean and standard deviation of `x`, given twice as two equal groups."""
    grouped = group_values(np.tile(x, 2), np.repeat([0, 1], x.size))
    return grouped.origin + grouped.means, np.sqrt(grouped.variances)


@pytest.mark.parametrize(("name", "mean", "sd", "rel"), CERTIFIED)
def test_group_moments_reach_the_certified_digits(columns, name, mean, sd, rel):
    """Mean and standard deviation of each group equal NIST's certified values."""
    means, sds = _moments(columns(f"nist_strd_{name}.csv", "y"))
    assert means == pytest.approx([mean, mean], rel=1e-12)
    assert sds == pytest.approx([sd, sd], rel=rel)


def test_numacc4_keeps_eight_digits():
    """NIST StRD NumAcc4 (1001 values about ten million, certified sd 0.1): float64 holds about 6e-9 of it."""
    x = np.array([10000000.2] + [10000000.1, 10000000.3] * 500)
    means, sds = _moments(x)
    assert means[0] == pytest.approx(10000000.2, rel=1e-12)
    assert sds[0] == pytest.approx(0.1, rel=1e-8)


def test_long_sums_keep_their_digits():
    """Means of 200,000 values a million from the first equal exactly rounded sums (math.fsum) to 1e-15."""
    x = 1e6 + np.random.default_rng(2).normal(size=400_001)
    x[0] = 0.0
    group = np.repeat([0, 1], [1, 400_000])
    exact = math.fsum(x[1:].tolist()) / 400_000
    assert group_values(x, group).means[1] == pytest.approx(exact, rel=3e-16)


def test_standard_resistor_moments(columns):
    """NIST e-Handbook 1.4.2.7, DZIUBA1: mean 28.01634, sd 0.06349 (recalled figures, reproduced from the
    data).
    """
    means, sds = _moments(columns("eh_dziuba1.csv", "resistance"))
    assert means[0] == pytest.approx(28.01634, abs=5.8e-6)
    assert sds[0] == pytest.approx(0.06349, abs=5.8e-6)
