"""What the statistics between groups and of shape refuse, and what they say then."""

import dataclasses
import math

import numpy as np
import pytest

from auditd import stats
from auditd.errors import BadInput, NotTestable
from auditd.stats._results import Estimate, HypothesisTest

RNG = np.random.default_rng(0)
X, GROUP = RNG.normal(size=40), np.repeat(np.arange(4), 10)
BETWEEN_GROUPS = (
    "one_way", "variance_components", "welch_anova", "kruskal_wallis", "brown_forsythe", "levene", "bartlett",
)  # fmt: skip
OF_ONE_SAMPLE = ("shapiro_wilk", "anderson_darling", "grubbs")
OF_TWO_SAMPLES = ("hedges_g", "equivalence")


def _with(value):
    spoiled = X.copy()
    spoiled[7] = value
    return spoiled


MALFORMED = {
    "NaN": _with(np.nan),
    "infinity": _with(np.inf),
    "two dimensions": X.reshape(10, 4),
    "text": np.array(["a"] * 40),
    "complex": X + 1j,
    "masked": np.ma.masked_array(X, X > 1),
    "too large": X * 1e200,
    "scalar": 3.0,
    "ragged": [[1.0, 2.0], [3.0]],
    "nothing": None,
}


def _calls():
    """Each function with one argument of values left open."""
    yield from ((name, lambda f, x: f(x, GROUP)) for name in BETWEEN_GROUPS)
    yield from ((name, lambda f, x: f(x)) for name in OF_ONE_SAMPLE)
    yield "generalized_esd", lambda f, x: f(x, 3)
    yield "level_order", lambda f, x: f(GROUP, x)
    yield "hedges_g", lambda f, x: f(X, x)
    yield "equivalence", lambda f, x: f(x, X, 1.0)


@pytest.mark.parametrize("case", MALFORMED)
@pytest.mark.parametrize(("name", "call"), list(_calls()), ids=lambda v: v if isinstance(v, str) else "")
def test_malformed_values_are_refused(name, call, case):
    """Values that are not finite real numbers in one dimension raise BadInput with a message, without a
    warning.
    """
    with pytest.raises(BadInput) as caught:
        call(getattr(stats, name), MALFORMED[case])
    assert len(str(caught.value)) > 20


@pytest.mark.parametrize(
    "case", ["NaN", "infinity", "text", "complex", "too large", "scalar", "ragged", "nothing"]
)
def test_malformed_tables_are_refused(case):
    """`intraclass` takes a two-dimensional table of finite numbers only."""
    table = MALFORMED[case]
    with pytest.raises(BadInput):
        stats.intraclass(table.reshape(10, 4) if isinstance(table, np.ndarray) else table)


@pytest.mark.parametrize("name", BETWEEN_GROUPS)
@pytest.mark.parametrize(
    "groups",
    [
        GROUP[:-1],
        GROUP.reshape(10, 4),
        [None] * 40,
        np.where(GROUP == 0, np.nan, 1.0),
        "a" * 40,
        [[1]] * 40,
        5,
    ],
    ids=["too few", "two dimensions", "None", "NaN", "one text", "lists", "number"],
)
def test_malformed_groups_are_refused(name, groups):
    """Another number of labels, and missing or incomparable labels, raise BadInput."""
    with pytest.raises(BadInput):
        getattr(stats, name)(X, groups)


@pytest.mark.parametrize("name", BETWEEN_GROUPS)
@pytest.mark.parametrize(
    ("x", "groups"),
    [
        (np.full(40, 0.1), GROUP), (X, np.zeros(40)), (X, np.arange(40)), (X[:1], GROUP[:1]),
        (X[:0], GROUP[:0]),
    ],
    ids=["constant", "one group", "groups of one", "one value", "none"],
)  # fmt: skip
def test_too_little_between_groups(name, x, groups):
    """Constant values, one group, groups of one and too few values say what is needed and what was got."""
    with pytest.raises(NotTestable) as caught:
        getattr(stats, name)(x, groups)
    assert caught.value.required
    assert caught.value.got is not None


@pytest.mark.parametrize("name", ["welch_anova", "brown_forsythe", "levene", "bartlett"])
def test_one_group_of_one_names_it(name):
    """A variance needs two values in each group; the message names the group that has one."""
    groups = [*(["big"] * 39), "lone"]
    with pytest.raises(NotTestable, match="lone"):
        getattr(stats, name)(X, groups)


@pytest.mark.parametrize("name", ["one_way", "variance_components", "kruskal_wallis"])
def test_some_groups_of_one_are_taken(name):
    """Where only some groups have one value, means and ranks can still be compared."""
    result = getattr(stats, name)(X, [*(["a"] * 20), *(["b"] * 18), "c", "d"])
    assert math.isfinite(result.statistic)


@pytest.mark.parametrize(
    "name", ["one_way", "variance_components", "welch_anova", "bartlett", "brown_forsythe"]
)
def test_groups_of_constant_values(name):
    """Values that vary between groups only leave no scale; also when rounding leaves some."""
    x = np.array([0.1, 0.1 + 0.2, 1 / 3, 7.7])[GROUP]
    with pytest.raises(NotTestable, match="vary"):
        getattr(stats, name)(x, GROUP)


@pytest.mark.parametrize("name", ["welch_anova", "bartlett"])
def test_one_constant_group_has_no_variance(name):
    """One group of constant values would have unbounded weight."""
    with pytest.raises(NotTestable, match="within each group"):
        getattr(stats, name)(np.where(GROUP == 2, 1.0, X), GROUP)


def test_deviations_of_one_size():
    """Pairs whose halves lie equally far from their centre leave Levene's F without a denominator."""
    for test in (stats.levene, stats.brown_forsythe):
        with pytest.raises(NotTestable, match="deviations"):
            test([0.0, 1.0, 5.0, 6.0, 0.0, 2.0], [0, 0, 1, 1, 2, 2])
        with pytest.raises(NotTestable, match="deviations"):
            test([0.0, 1.0, 5.0, 6.0], [0, 0, 1, 1])


@pytest.mark.parametrize(("name", "n_min"), [("shapiro_wilk", 3), ("anderson_darling", 8), ("grubbs", 3)])
def test_samples_too_small_or_constant(name, n_min):
    """Each test says how many values it needs; constant values are refused by all."""
    test = getattr(stats, name)
    with pytest.raises(NotTestable, match=f"{n_min} values"):
        test(X[: n_min - 1])
    assert math.isfinite(test(X[:n_min]).statistic)
    with pytest.raises(NotTestable, match="vary"):
        test(np.full(30, 0.1))


def test_shapiro_wilk_names_its_limit():
    """Beyond 5,000 values Royston's approximation says nothing; the library's warning does not appear."""
    x = np.random.default_rng(1).normal(size=5001)
    with pytest.raises(NotTestable, match="5000") as caught:
        stats.shapiro_wilk(x)
    assert caught.value.got == "5001"
    assert 0 <= stats.shapiro_wilk(x[:5000]).pvalue <= 1


@pytest.mark.parametrize("max_outliers", [0, -1, 21, 2.0, True, None, "3"])
def test_generalized_esd_refuses_a_strange_number(max_outliers):
    """The number of outliers is whole, at least one and at most half of the values."""
    with pytest.raises(BadInput, match="max_outliers"):
        stats.generalized_esd(X, max_outliers)


def test_generalized_esd_needs_fifteen():
    """Rosner's critical values are not to be trusted below 15 values."""
    with pytest.raises(NotTestable, match="15"):
        stats.generalized_esd(X[:14], 2)
    with pytest.raises(NotTestable, match="vary"):
        stats.generalized_esd(np.ones(30), 2)


def test_generalized_esd_ends_at_a_constant_rest():
    """Two values beside a constant are named, and the search ends without a division by zero."""
    result = stats.generalized_esd([*([1.0] * 20), 9.0, -4.0], 5)
    assert set(result.outliers) == {20, 21}
    assert len(result.deviations) == 2


@pytest.mark.parametrize("level", [0.0, 1.0, -0.1, 1.5, np.nan, "0.05", None, True])
def test_levels_are_probabilities(level):
    """A level that is no probability strictly between 0 and 1 is refused."""
    for call in (
        lambda: stats.grubbs(X, level),
        lambda: stats.generalized_esd(X, 3, level),
        lambda: stats.equivalence(X, X + 1, 0.5, level=level),
        lambda: stats.one_way(X, GROUP, confidence=level),
        lambda: stats.intraclass(X.reshape(10, 4), confidence=level),
        lambda: stats.hedges_g(X, X + 1, confidence=level),
    ):
        with pytest.raises(BadInput):
            call()


def test_alternatives_are_listed():
    """An unknown alternative is refused with the known ones."""
    with pytest.raises(BadInput, match="two-sided"):
        stats.grubbs(X, alternative="upper")
    with pytest.raises(BadInput, match="clustered"):
        stats.level_order(GROUP, np.arange(40), alternative="few")


@pytest.mark.parametrize("margin", [0.0, -1.0, np.inf, np.nan, "1", None])
def test_margins_are_positive(margin):
    """A margin is a finite number above 0."""
    with pytest.raises(BadInput, match="margin"):
        stats.equivalence(X, X + 1, margin)


@pytest.mark.parametrize("name", OF_TWO_SAMPLES)
def test_two_samples_too_little(name):
    """Empty, single and constant samples are refused with what is needed."""
    extra = (1.0,) if name == "equivalence" else ()
    test = getattr(stats, name)
    for a, b in (([], X), ([1.0], [2.0]), ([1.0, 1.0], [1.0, 1.0]), ([1.0, 1.0, 1.0], [2.0, 2.0])):
        with pytest.raises(NotTestable):
            test(a, b, *extra)


def test_equivalence_of_unequal_variances_needs_both():
    """Welch's form needs a variance from each sample; the pooled form does not."""
    with pytest.raises(NotTestable):
        stats.equivalence([1.0, 1.0, 1.0], X, 5.0)
    assert stats.equivalence([1.0, 1.0, 1.0], X, 5.0, pooled=True).pvalue < 1
    with pytest.raises(BadInput, match="pooled"):
        stats.equivalence(X, X + 1, 1.0, pooled="no")


def test_intraclass_too_little():
    """One row, one column, rows that do not differ, and rows that agree without error are refused."""
    for table in (
        X[None, :],
        X[:, None],
        np.ones((4, 3)),
        np.tile(X[:4], (3, 1)),
        np.tile(X[:4, None], (1, 3)),
    ):
        with pytest.raises(NotTestable):
            stats.intraclass(table)


def test_intraclass_of_rows_that_hardly_differ():
    """With the rows' mean square Satterthwaite's df fall to 0: limits stay finite and in order."""
    for k in (2, 3, 5):
        table = np.vstack([np.arange(k), np.arange(k)[::-1], np.full(k, (k - 1) / 2)]).astype(float)
        table[0, 0] += 1e-7
        for form, (icc, low, high) in stats.intraclass(table).items():
            assert -np.inf < low <= icc <= high <= 1.0
            if form.endswith("1"):
                assert low >= -1 / (k - 1)


def test_labels_too_little():
    """Association needs two levels of each; their order needs a level that comes twice, and no ties."""
    with pytest.raises(NotTestable, match="two levels"):
        stats.cramers_v(GROUP, np.zeros(40))
    with pytest.raises(BadInput, match="labels"):
        stats.cramers_v(GROUP, GROUP[:-1])
    with pytest.raises(NotTestable, match="two levels"):
        stats.level_order(np.zeros(40), np.arange(40))
    with pytest.raises(NotTestable, match="twice"):
        stats.level_order(np.arange(40), np.arange(40))
    with pytest.raises(NotTestable, match="at least 3"):
        stats.level_order([1, 2], [1, 2])
    with pytest.raises(BadInput, match="ties"):
        stats.level_order(GROUP, np.arange(40) // 2)


def test_labels_are_compared_as_json_values():
    """1 and 1.0 are one level, "1" is another."""
    assert stats.one_way(X[:6], [1, 1.0, "1", "1", 1, "1"]).n_groups == 2


def test_whole_numbers_are_taken():
    """Integers of any width, and plain lists, give what the same floats give."""
    whole = np.round(X * 10).astype(np.int16)
    for name in BETWEEN_GROUPS:
        test = getattr(stats, name)
        assert test(whole, GROUP) == test(whole.astype(float).tolist(), GROUP.tolist())


def test_results_are_complete():
    """Every result is frozen, keyword-only, and has a finite statistic, n and a source; tests also p and
    null.
    """
    results = [getattr(stats, name)(X, GROUP) for name in BETWEEN_GROUPS]
    results += [getattr(stats, name)(X) for name in OF_ONE_SAMPLE]
    results += [stats.generalized_esd(X, 3), stats.cramers_v(GROUP, GROUP % 2)]
    results += [stats.level_order(GROUP, X), stats.hedges_g(X, X + 1), stats.equivalence(X, X + 1, 2.0)]
    for result in results:
        assert isinstance(result, Estimate)
        assert type(result.statistic) is float
        assert math.isfinite(result.statistic)
        assert type(result.n) is int
        assert "(" in result.source
        if isinstance(result, HypothesisTest):
            assert 0.0 <= result.pvalue <= 1.0
            assert result.null
        with pytest.raises(dataclasses.FrozenInstanceError):
            result.statistic = 0.0
    estimates = {type(r).__name__ for r in results if not isinstance(r, HypothesisTest)}
    assert estimates == {"VarianceComponents", "HedgesG"}


def test_extreme_differences_do_not_warn():
    """Groups a million deviations apart and samples of very unequal size give p of 0 or 1 and finite
    intervals.
    """
    x = X + 1e6 * GROUP
    assert stats.one_way(x, GROUP).pvalue == pytest.approx(0.0, abs=1e-100)
    assert stats.welch_anova(x, GROUP).pvalue == pytest.approx(0.0, abs=1e-50)
    g = stats.hedges_g(X, np.concatenate((X + 50, X + 51)))
    assert -100 < g.low < g.d < g.high < 0
    tiny = stats.equivalence(X, X + 1e9, 1.0)
    assert tiny.pvalue == pytest.approx(1.0)


@pytest.mark.parametrize("scale", [1e-139, 1e-60, 1e60, 1e138])
def test_any_unit_within_double_precision(scale):
    """From 1e-139 to 1e138 nothing overflows, and the F of the values is unchanged."""
    assert stats.one_way(X * scale, GROUP).statistic == pytest.approx(
        stats.one_way(X, GROUP).statistic, rel=1e-9
    )
    ours = stats.equivalence(X * scale, X[:30] * scale * 0.9, 1.0 * scale)
    assert ours.pvalue == pytest.approx(stats.equivalence(X, X[:30] * 0.9, 1.0).pvalue, rel=1e-7)
    assert stats.hedges_g(X * scale, (X + 1) * scale).g == pytest.approx(stats.hedges_g(X, X + 1).g, rel=1e-7)
