"""What must hold of the statistics between groups and of shape, whatever the values."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from auditd import stats
from auditd.stats._groups import group_values, size_classes
from auditd.stats.level_order import arrangements

BETWEEN_GROUPS = (
    "one_way", "variance_components", "welch_anova", "kruskal_wallis", "brown_forsythe", "levene", "bartlett",
)  # fmt: skip
OF_ONE_SAMPLE = ("shapiro_wilk", "anderson_darling", "grubbs")

seeds = st.integers(0, 2**32 - 1)
shifts = st.floats(-1e3, 1e3)
scales = st.floats(1e-6, 1e6)


@st.composite
def layouts(draw):
    """Values and group codes: two to six groups of three to nine values each, in random order."""
    rng = np.random.default_rng(draw(seeds))
    sizes = draw(st.lists(st.integers(3, 9), min_size=2, max_size=6))
    group = rng.permutation(np.repeat(np.arange(len(sizes)), sizes))
    effects = draw(st.sampled_from([0.0, 0.5, 3.0])) * rng.normal(size=len(sizes))
    return rng.normal(size=group.size) + effects[group], group


def _sizes(x, name):
    """What of a result must not change with the unit of the values."""
    result = getattr(stats, name)(*x)
    got = [result.statistic, getattr(result, "pvalue", 0.0)]
    if name == "one_way":
        got += [result.icc, result.icc_low, result.icc_high, result.design_effect]
    return got


@pytest.mark.parametrize("name", BETWEEN_GROUPS)
@given(layout=layouts(), shift=shifts, scale=scales)
@settings(max_examples=25, deadline=None)
def test_tests_between_groups_ignore_shift_and_scale(name, layout, shift, scale):
    """Values in another unit from another origin give the same statistic and p."""
    x, group = layout
    moved = (x + shift) * scale
    assert _sizes((moved, group), name) == pytest.approx(_sizes((x, group), name), rel=1e-6, abs=1e-9)


@pytest.mark.parametrize("name", BETWEEN_GROUPS)
@given(layout=layouts(), seed=seeds)
@settings(max_examples=25, deadline=None)
def test_tests_between_groups_ignore_names_and_order(name, layout, seed):
    """Renaming groups and listing the runs in another order changes nothing."""
    x, group = layout
    rng = np.random.default_rng(seed)
    order = rng.permutation(x.size)
    names = rng.permutation([f"host {i}" for i in range(group.max() + 1)])
    other = [str(names[g]) for g in group[order]]
    assert _sizes((x[order], other), name) == pytest.approx(_sizes((x, group), name), rel=1e-8, abs=1e-11)


@pytest.mark.parametrize("name", OF_ONE_SAMPLE)
@given(seed=seeds, n=st.integers(8, 60), shift=shifts, scale=scales)
@settings(max_examples=25, deadline=None)
def test_tests_of_one_sample_ignore_shift_and_scale(name, seed, n, shift, scale):
    """Values in another unit from another origin give the same statistic and p."""
    x = np.random.default_rng(seed).normal(size=n)
    moved = (x + shift) * scale
    assert _sizes((moved,), name) == pytest.approx(_sizes((x,), name), rel=1e-6, abs=1e-9)


@given(seed=seeds, n=st.integers(15, 60), shift=shifts, scale=scales)
@settings(max_examples=50, deadline=None)
def test_outliers_stay_the_same_runs(seed, n, shift, scale):
    """generalized_esd names the same runs after shifting, scaling and turning the sign of the values."""
    rng = np.random.default_rng(seed)
    x = rng.normal(size=n)
    x[rng.integers(n)] += 8.0
    found = stats.generalized_esd(x, 5).outliers
    assert stats.generalized_esd((x + shift) * scale, 5).outliers == found
    assert stats.generalized_esd(-x, 5).outliers == found


@given(seed=seeds, n=st.integers(3, 40))
@settings(max_examples=50, deadline=None)
def test_sides_of_grubbs_mirror_each_other(seed, n):
    """The largest value tested above is the smallest of the negated values tested below."""
    x = np.random.default_rng(seed).normal(size=n)
    above, below = stats.grubbs(x, alternative="max"), stats.grubbs(-x, alternative="min")
    assert (above.index, above.statistic) == (below.index, pytest.approx(below.statistic, rel=1e-12))
    assert stats.grubbs(x).statistic >= above.statistic - 1e-12


@given(layout=layouts())
@settings(max_examples=50, deadline=None)
def test_restricted_likelihood_is_highest_at_the_estimate(layout):
    """No other ratio on a fine grid, and none just beside the estimate, has a lower deviance."""
    x, group = layout
    result = stats.variance_components(x, group)
    classes = size_classes(group_values(x, group))
    best = classes.deviance(result.between / result.within)
    others = [*np.geomspace(1e-6, 1e4, 400), result.between / result.within * 1.01, 0.0]
    assert min(classes.deviance(ratio) for ratio in others) >= best - 1e-9


@given(seed=seeds, k=st.integers(2, 6), size=st.integers(2, 6))
@settings(max_examples=50, deadline=None)
def test_equal_sizes_have_their_closed_form(seed, k, size):
    """With equal sizes REML equals mean squares, or the pooled variance where those are negative."""
    rng = np.random.default_rng(seed)
    group = np.repeat(np.arange(k), size)
    x = rng.normal(size=k * size) + rng.normal(size=k)[group]
    reml, squares = stats.variance_components(x, group), stats.one_way(x, group)
    if squares.between > 0:
        assert (reml.between, reml.within) == pytest.approx((squares.between, squares.within), rel=1e-7)
    else:
        assert (reml.between, reml.within) == (0.0, pytest.approx(x.var(ddof=1), rel=1e-9))


@given(layout=layouts(), level=st.floats(0.5, 0.99))
@settings(max_examples=50, deadline=None)
def test_wider_confidence_contains_narrower(layout, level):
    """A 99.5 % interval for the intraclass correlation contains any narrower one, within its possible
    range.
    """
    narrow, wide = (stats.one_way(*layout, confidence=c) for c in (level, 0.995))
    assert wide.icc_low <= narrow.icc_low <= narrow.icc_high <= wide.icc_high
    largest = int(np.bincount(layout[1]).max())
    assert -1 / (largest - 1) - 1e-9 <= wide.icc_low
    assert wide.icc_high <= 1.0


@given(seed=seeds, n=st.integers(2, 8), k=st.integers(2, 6), shift=shifts, scale=scales)
@settings(max_examples=60, deadline=None)
def test_intraclass_ignores_unit_and_arrangement(seed, n, k, shift, scale):
    """All six forms are the same after a change of unit and in any order of rows and columns."""
    rng = np.random.default_rng(seed)
    table = rng.normal(size=(n, k)) + rng.normal(size=(n, 1))
    before = stats.intraclass(table)
    moved = ((table + shift) * scale)[rng.permutation(n)][:, rng.permutation(k)]
    after = stats.intraclass(moved)
    for form, values in before.items():
        assert after[form] == pytest.approx(values, rel=1e-5, abs=1e-8)
        assert values[1] <= values[0] <= values[2] <= 1.0


@given(seed=seeds, n=st.integers(2, 8), k=st.integers(2, 6))
@settings(max_examples=40, deadline=None)
def test_consistency_ignores_columns_levels(seed, n, k):
    """Form 3 is the same when each judge adds a constant of their own."""
    rng = np.random.default_rng(seed)
    table = rng.normal(size=(n, k))
    offset = stats.intraclass(table + 10 * rng.normal(size=k))
    for form in ("3,1", "3,k"):
        assert offset[form] == pytest.approx(stats.intraclass(table)[form], rel=1e-7, abs=1e-9)


@given(seed=seeds, n_a=st.integers(2, 30), n_b=st.integers(2, 30), shift=shifts, scale=scales)
@settings(max_examples=50, deadline=None)
def test_difference_turns_its_sign(seed, n_a, n_b, shift, scale):
    """Exchanging samples negates g and mirrors its interval; a change of unit leaves both; g is nearer 0
    than d.
    """
    rng = np.random.default_rng(seed)
    a, b = rng.normal(0.5, 1, n_a), rng.normal(0, 1, n_b)
    one, other = stats.hedges_g(a, b), stats.hedges_g(b, a)
    assert (one.g, one.low, one.high) == pytest.approx(
        (-other.g, -other.high, -other.low), rel=1e-7, abs=1e-9
    )
    moved = stats.hedges_g((a + shift) * scale, (b + shift) * scale)
    assert (moved.g, moved.low, moved.high) == pytest.approx((one.g, one.low, one.high), rel=1e-6, abs=1e-8)
    assert abs(one.g) <= abs(one.d)


@given(seed=seeds, margin=st.floats(0.05, 3), level=st.floats(0.001, 0.4), pooled=st.booleans())
@settings(max_examples=60, deadline=None)
def test_equivalence_is_its_interval_inside_the_margin(seed, margin, level, pooled):
    """p ≤ level exactly when the (1 − 2·level) interval lies within ± margin; exchanging samples changes no
    p.
    """
    rng = np.random.default_rng(seed)
    a, b = rng.normal(0.2, 1, 12), rng.normal(0, 2, 17)
    result = stats.equivalence(a, b, margin, pooled=pooled, level=level)
    assume(min(abs(result.low + margin), abs(result.high - margin)) > 1e-9)
    assert result.equivalent == (-margin < result.low and result.high < margin)
    assert result.pvalue == max(result.pvalue_lower, result.pvalue_upper)
    other = stats.equivalence(b, a, margin, pooled=pooled, level=level)
    assert other.pvalue == pytest.approx(result.pvalue, rel=1e-8, abs=1e-14)


labels = st.lists(st.sampled_from(["a", "b", "c", 1, 2.5, True]), min_size=4, max_size=60)


@given(labels, seeds)
@settings(max_examples=60, deadline=None)
def test_association_is_symmetric(a, seed):
    """V is the same both ways round and after renaming, lies in [0, 1], and is 1 of a label with itself."""
    assume(len({(type(v) is bool, v) for v in a}) > 1)
    b = np.random.default_rng(seed).integers(0, 3, len(a))
    assume(np.unique(b).size > 1)
    v = stats.cramers_v(a, b)
    assert 0.0 <= v.corrected <= 1.0
    assert stats.cramers_v(b, a).statistic == pytest.approx(v.statistic, rel=1e-9, abs=1e-12)
    assert stats.cramers_v([str(x) for x in a], 7 - b).statistic == pytest.approx(v.statistic, rel=1e-9)
    assert stats.cramers_v(a, a).statistic == pytest.approx(1.0, rel=1e-12)


@given(st.lists(st.integers(0, 3), min_size=4, max_size=40), seeds)
@settings(max_examples=60, deadline=None)
def test_order_of_levels_depends_on_succession_only(levels, seed):
    """Backwards, renamed, listed otherwise or on another scale of time, the runs and p are the same."""
    assume(1 < len(set(levels)) < len(levels))
    n = len(levels)
    result = stats.level_order(levels, np.arange(n))
    listed = np.random.default_rng(seed).permutation(n)
    for other, order in (
        (levels[::-1], np.arange(n)),
        ([f"level {v}" for v in levels], np.exp(np.arange(n) / n)),
        (np.array(levels)[listed], 100.0 + 7.0 * listed),
    ):
        again = stats.level_order(other, order)
        assert (again.n_runs, again.pvalue) == (result.n_runs, result.pvalue)


@given(st.lists(st.integers(1, 6), min_size=1, max_size=6))
@settings(max_examples=60, deadline=None)
def test_arrangements_are_all_counted(sizes):
    """The counts by number of runs are not negative and add up to the multinomial coefficient."""
    counts = arrangements(sizes)
    total = 1
    for i, size in enumerate(sizes):
        for j in range(1, size + 1):
            total = total * (sum(sizes[:i]) + j) // j
    assert min(counts) >= 0
    assert sum(counts) == total


def test_no_input_is_changed():
    """Every function leaves its arrays as they were, also read-only ones and views with strides."""
    rng = np.random.default_rng(0)
    x = rng.normal(size=(40, 2))[:, 0]
    group, table = np.repeat(np.arange(4), 10), rng.normal(size=(10, 4))
    order = rng.permutation(40).astype(float)
    before = [a.copy() for a in (x, group, table, order)]
    for a in (x, group, table, order):
        a.setflags(write=False)
    for name in BETWEEN_GROUPS:
        getattr(stats, name)(x, group)
    for name in OF_ONE_SAMPLE:
        getattr(stats, name)(x)
    stats.generalized_esd(x, 5)
    stats.cramers_v(group, group[::-1])
    stats.level_order(group, order)
    stats.intraclass(table)
    stats.hedges_g(x[:20], x[20:])
    stats.equivalence(x[:20], x[20:], 1.0)
    for a, b in zip((x, group, table, order), before, strict=True):
        assert np.array_equal(a, b)
