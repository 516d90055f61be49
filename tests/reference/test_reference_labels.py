"""Association and order of labels against published values."""

import itertools
import sys
from collections import Counter

import numpy as np
import pingouin
import pytest
from scipy.stats.contingency import association
from statsmodels.sandbox.stats.runs import runstest_1samp

from auditd.stats import cramers_v, level_order
from auditd.stats.level_order import arrangements


def test_arthritis():
    """Koch & Edwards (1988), R vcd's assocstats: chi-squared 13.055, 2 df, p .0014626, V .394."""
    table = {("P", "none"): 29, ("P", "some"): 7, ("P", "marked"): 7,
             ("T", "none"): 13, ("T", "some"): 7, ("T", "marked"): 21}  # fmt: skip
    pairs = [pair for pair, count in table.items() for _ in range(count)]
    result = cramers_v([a for a, _ in pairs], [b for _, b in pairs])
    assert result.statistic == pytest.approx(0.394, abs=5.5e-4)
    assert result.chi_squared == pytest.approx(13.055, abs=5.5e-4)
    assert result.pvalue == pytest.approx(0.0014626, abs=5.5e-8)
    assert (result.df, result.n) == (2, 84)


def test_cramers_v_agrees_with_other_libraries():
    """scipy's association and pingouin's test of independence agree on heart disease by chest pain."""
    frame = pingouin.read_dataset("chi2_independence")
    result = cramers_v(frame["cp"].to_numpy(), frame["target"].to_numpy())
    _, observed, tests = pingouin.chi2_independence(frame, x="cp", y="target", correction=False)
    pearson = tests[tests["test"] == "pearson"].iloc[0]
    assert result.chi_squared == pytest.approx(float(pearson["chi2"]), rel=1e-10)
    assert result.statistic == pytest.approx(float(pearson["cramer"]), rel=1e-10)
    assert result.statistic == pytest.approx(association(observed.to_numpy().astype(int)), rel=1e-10)


def test_corrected_v_by_hand():
    """Bergsma (2013), eq. of the corrected V, for a two by two table with 30, 10, 10 and 30 runs."""
    a = np.repeat([0, 0, 1, 1], [30, 10, 10, 30])
    b = np.repeat([0, 1, 0, 1], [30, 10, 10, 30])
    phi_squared = 20 / 80 - 1 / 79
    expected = (phi_squared / (2 - 1 / 79 - 1)) ** 0.5
    assert cramers_v(a, b).statistic == pytest.approx(0.5, rel=1e-12)
    assert cramers_v(a, b).corrected == pytest.approx(expected, rel=1e-12)


def test_three_categories():
    """A documented example of the k-category test: 12 runs in ABBCCBAACCACBBAABBBC, not significant at 5 %.

    Source: real-statistics.com, "Runs test with more than two categories"; its formulas, after Wallis &
    Roberts, give 14.2 expected runs.
    """
    result = level_order(list("ABBCCBAACCACBBAABBBC"), np.arange(20))
    assert result.n_runs == 12
    assert result.expected_runs == pytest.approx((20 * 21 - (6**2 + 8**2 + 6**2)) / 20, rel=1e-12)
    assert result.pvalue > 0.05


def test_two_categories_of_a_documented_example():
    """CPAN Statistics::Sequences::Runs 0.22: 11 runs of 11 and 9, 10.9 expected, exact upper p .5700167."""
    sequence = [int(c) for c in "10001101100100111101"]
    result = level_order(sequence, np.arange(20), alternative="alternating")
    assert (result.n_runs, result.expected_runs) == (11, pytest.approx(10.9, rel=1e-12))
    assert result.pvalue == pytest.approx(0.5700167, abs=5.5e-8)


def test_counts_of_a_documented_distribution():
    """A published worked example of 11 ones and 14 zeros: the number of arrangements with 2 to 23 runs."""
    published = (
        2, 23, 260, 1365, 7020, 22230, 68640, 145860, 300300, 450450, 648648, 702702, 720720, 566280, 411840,
        231660, 115830, 45045, 14300, 3575, 572, 78,
    )  # fmt: skip
    assert tuple(arrangements([11, 14])[2:24]) == published


def test_swed_and_eisenhart_limits():
    """Swed & Eisenhart (1943), 10 and 10: 6 runs or fewer, or 16 or more, have at most .025 (from memory)."""
    counts = arrangements([10, 10])
    total = sum(counts)
    assert sum(counts[:7]) / total <= 0.025 < sum(counts[:8]) / total
    assert sum(counts[16:]) / total <= 0.025 < sum(counts[15:]) / total


@pytest.mark.parametrize("sizes", [(2, 3), (1, 2, 3), (3, 3, 2), (1, 1, 1, 4), (2, 2, 2, 2)])
def test_counts_equal_enumeration(sizes):
    """All arrangements, listed one by one, have as many runs as counted, and the stated moments."""
    items = [level for level, size in enumerate(sizes) for _ in range(size)]
    tally = Counter(
        1 + sum(a != b for a, b in itertools.pairwise(order)) for order in set(itertools.permutations(items))
    )
    counts = arrangements(list(sizes))
    assert {r: c for r, c in enumerate(counts) if c} == dict(tally)
    runs = np.array([r for r, c in tally.items() for _ in range(c)])
    result = level_order(items, np.arange(len(items)))
    assert result.expected_runs == pytest.approx(runs.mean(), rel=1e-12)
    assert result.sd_runs == pytest.approx(runs.std(), rel=1e-12)


def test_z_agrees_with_statsmodels_for_two_levels():
    """statsmodels' runs test without continuity correction gives the same z for 30 and 50 of two levels."""
    levels = np.random.default_rng(4).permutation(np.repeat([0, 1], [30, 50]))
    z, _ = runstest_1samp(levels, cutoff=0.5, correction=False)
    assert level_order(levels, np.arange(80)).statistic == pytest.approx(z, rel=1e-10)


@pytest.mark.parametrize(("sizes", "method"), [((90, 70, 40), "normal"), ((2,) * 90 + (1,) * 20, "poisson")])
def test_laws_for_many_runs_are_near_the_exact(monkeypatch, sizes, method):
    """At 200 runs the law used beyond that lies within .01 of the exact p-value, on both sides."""
    levels = np.repeat(np.arange(len(sizes)), sizes)
    rng = np.random.default_rng(8)
    orders = [rng.permutation(200) for _ in range(20)]
    for alternative in ("clustered", "alternating"):
        exact = [level_order(levels, order, alternative=alternative).pvalue for order in orders]
        with monkeypatch.context() as patch:
            patch.setattr(sys.modules["auditd.stats.level_order"], "N_EXACT", 0)
            approximate = [level_order(levels, order, alternative=alternative) for order in orders]
        assert {result.method for result in approximate} == {method}
        assert [result.pvalue for result in approximate] == pytest.approx(exact, abs=0.01)
