"""Malformed or insufficient series are refused with a message, and never answered with NaN or a warning."""

import dataclasses
import math
import subprocess
import sys

import numpy as np
import pytest

import auditd.stats
from auditd.errors import BadInput, NotTestable
from auditd.stats import (
    autocorrelation,
    breusch_godfrey,
    cluster_covariance,
    cusum,
    cusum_arl,
    durbin_watson,
    durbin_watson_bounds,
    ewma,
    ewma_arl,
    fisher_g,
    integrated_time,
    ljung_box,
    lomb_scargle,
    mann_kendall,
    newey_west,
    pettitt,
    runs_test,
    von_neumann_rank,
)


def length_of(x):
    """The length of whatever was given; 1 for what has none."""
    return len(x) if hasattr(x, "__len__") else 1


def with_ones(x):
    """A constant column of matching length, for whatever shape was given."""
    return np.ones((length_of(x), 1))


# Each function of one series, called with otherwise sound arguments.
ON_SERIES = {
    "autocorrelation": lambda x: autocorrelation(x, 2),
    "breusch_godfrey": lambda x: breusch_godfrey(x, with_ones(x), 1),
    "cluster_covariance": lambda x: cluster_covariance(x, with_ones(x), np.arange(length_of(x)) % 2),
    "cusum": lambda x: cusum(x, 0, 1, 0.5, 5),
    "durbin_watson": durbin_watson,
    "durbin_watson with a design": lambda x: durbin_watson(x, with_ones(x)),
    "ewma": lambda x: ewma(x, 0, 1, 0.2, 3),
    "fisher_g": fisher_g,
    "integrated_time": integrated_time,
    "ljung_box": lambda x: ljung_box(x, 2),
    "lomb_scargle": lambda x: lomb_scargle(np.arange(length_of(x)), x),
    "mann_kendall": mann_kendall,
    "mann_kendall corrected": lambda x: mann_kendall(x, correction="hamed-rao"),
    "newey_west": lambda x: newey_west(x, with_ones(x), 1),
    "pettitt": pettitt,
    "runs_test": runs_test,
    "von_neumann_rank": von_neumann_rank,
}
# A chart of constant values is a sound chart, and constant residuals a sound (if odd) argument of a sandwich.
CONSTANT_ALLOWED = {"cusum", "ewma", "newey_west", "cluster_covariance"}

series = pytest.mark.parametrize("name", ON_SERIES)


def numbers_in(result):
    """Every float of a result, flat."""
    if isinstance(result, np.ndarray):
        return result.ravel()
    values = dataclasses.asdict(result).values()
    kept = [
        np.ravel(v)
        for v in values
        if isinstance(v, (float, int, np.ndarray, tuple)) and not isinstance(v, bool)
    ]
    return np.concatenate(kept).astype(float)


@series
@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_values_that_are_not_finite(name, value):
    """NaN and infinities are malformed, and the message says where the first one is."""
    x = np.random.default_rng(0).normal(size=60)
    x[7] = value
    with pytest.raises(BadInput, match=r"not finite, the first at \[7\]"):
        ON_SERIES[name](x)


@series
@pytest.mark.parametrize(
    "x",
    [
        np.ones((10, 2)),
        3.0,
        ["a"] * 20,
        [1.0, "2"] * 10,
        [None] * 20,
        [1j] * 20,
        np.array(["x"] * 9),
        [[1], [1, 2]],
    ],
    ids=["matrix", "scalar", "texts", "numeric text", "none", "complex", "array of text", "ragged"],
)
def test_wrong_shapes_and_types(name, x):
    """Matrices, scalars, texts, None and complex numbers are malformed."""
    with pytest.raises(BadInput):
        ON_SERIES[name](x)


@series
def test_constant_values(name):
    """Constant values say nothing about order or dependence."""
    if name in CONSTANT_ALLOWED:
        assert np.all(np.isfinite(numbers_in(ON_SERIES[name](np.full(40, 2.5)))))
        return
    with pytest.raises(NotTestable):
        ON_SERIES[name](np.full(40, 2.5))


@series
def test_no_and_few_values(name):
    """None at all cannot be tested, and one value neither where an order is asked about."""
    with pytest.raises((NotTestable, BadInput)):
        ON_SERIES[name](np.array([]))
    if name not in {"cusum", "ewma"}:
        with pytest.raises((NotTestable, BadInput)):
            ON_SERIES[name](np.array([1.0]))
    if name not in CONSTANT_ALLOWED:
        with pytest.raises(NotTestable) as caught:
            ON_SERIES[name](np.array([1.0, 2.0]))
        assert str(caught.value.required)
        assert str(caught.value.got)


@series
@pytest.mark.parametrize("scale", [1e200, 1e-200])
def test_values_beyond_squares(name, scale):
    """Values whose squares leave double precision are refused or handled, without overflow or NaN."""
    x = scale * np.random.default_rng(1).normal(size=60)
    try:
        got = ON_SERIES[name](x)
    except (BadInput, NotTestable):
        return
    assert np.all(np.isfinite(numbers_in(got)))


@series
@pytest.mark.parametrize("n", [3, 4, 5, 6, 7, 8, 9, 12])
def test_small_series_give_numbers_or_a_reason(name, n):
    """From three values on there is either an answer of finite numbers or NotTestable."""
    for x in (np.arange(n, dtype=float), np.arange(n) % 2, np.r_[np.zeros(n - 1), 1], np.arange(n) ** 2 % 5):
        try:
            got = ON_SERIES[name](x)
        except NotTestable:
            continue
        assert np.all(np.isfinite(numbers_in(got)))
        if hasattr(got, "pvalue"):
            assert 0.0 <= got.pvalue <= 1.0


@series
@pytest.mark.parametrize(
    "shape", ["up", "down", "step", "spike", "alternating", "line plus rounding", "offset"]
)
def test_regular_series_give_numbers_or_a_reason(name, shape):
    """Straight lines, steps, spikes and alternation never end in NaN."""
    i = np.arange(400.0)
    x = {
        "up": i, "down": -i, "step": (i > 200) * 1.0, "spike": (i == 100) * 1.0, "alternating": i % 2,
        "line plus rounding": 0.1 * i, "offset": 1e15 + i % 3,
    }[shape]  # fmt: skip
    try:
        got = ON_SERIES[name](x)
    except NotTestable:
        return
    except BadInput as refused:
        # Without a design, values far from mean zero are no residuals.
        assert name == "durbin_watson"
        assert "mean far from zero" in str(refused)  # noqa: PT017
        return
    assert np.all(np.isfinite(numbers_in(got)))


@pytest.mark.parametrize(
    "call",
    [
        lambda x, d: durbin_watson(x, d[:-1]),
        lambda x, d: durbin_watson(x, d[:, 0]),
        lambda x, d: durbin_watson(x, np.column_stack([d, 2 * d[:, 1]])),
        lambda x, d: durbin_watson(x, np.column_stack([d, np.zeros(len(x))])),
        lambda x, d: durbin_watson(x, d, "both"),
        lambda x, d: durbin_watson(x, d, None),
        lambda x, d: durbin_watson(x + 50),
        lambda x, d: breusch_godfrey(x, d * np.nan, 1),
        lambda x, d: breusch_godfrey(x, d, 0),
        lambda x, d: breusch_godfrey(x, d, 1.5),
        lambda x, d: newey_west(x, d, -1),
        lambda x, d: newey_west(x, d[:5], 1),
        lambda x, d: cluster_covariance(x, d, np.zeros(3)),
        lambda x, d: cluster_covariance(x, d, [None] * len(x)),
        lambda x, d: cluster_covariance(x, d, np.full(len(x), np.nan)),
        lambda x, d: cluster_covariance(x, d, "abc"),
        lambda x, d: ljung_box(x, "3"),
        lambda x, d: ljung_box(x, 3, n_fitted=3),
        lambda x, d: ljung_box(x, True),
        lambda x, d: autocorrelation(x, 0),
        lambda x, d: autocorrelation(x, 3, confidence=1.0),
        lambda x, d: runs_test(x, "mode"),
        lambda x, d: runs_test(x, np.nan),
        lambda x, d: integrated_time(x, method="batch"),
        lambda x, d: mann_kendall(x, np.arange(len(x))[::-1]),
        lambda x, d: mann_kendall(x, np.arange(len(x) - 1)),
        lambda x, d: mann_kendall(x, correction="yue"),
        lambda x, d: mann_kendall(x, correction="hamed-rao", lags=0),
        lambda x, d: mann_kendall(x, confidence=0),
        lambda x, d: von_neumann_rank(x, "up"),
        lambda x, d: lomb_scargle(np.arange(len(x))[::-1], x),
        lambda x, d: lomb_scargle(np.arange(len(x) + 1), x),
        lambda x, d: lomb_scargle(np.arange(len(x)), x, oversampling=0),
        lambda x, d: cusum(x, 0, 0, 0.5, 5),
        lambda x, d: cusum(x, 0, -1, 0.5, 5),
        lambda x, d: cusum(x, 0, 1, -0.5, 5),
        lambda x, d: cusum(x, 0, 1, 0.5, 0),
        lambda x, d: cusum(x, np.nan, 1, 0.5, 5),
        lambda x, d: cusum(x, 0, 1e-300, 0.5, 5),
        lambda x, d: ewma(x, 0, 1, 0, 3),
        lambda x, d: ewma(x, 0, 1, 1.1, 3),
        lambda x, d: ewma(x, 0, 1, 0.2, 0),
        lambda x, d: ewma(x, "0", 1, 0.2, 3),
    ],
)
def test_malformed_arguments(call):
    """Each malformed argument is refused, whatever else is sound."""
    rng = np.random.default_rng(3)
    x = rng.normal(size=400)
    with pytest.raises(BadInput):
        call(x, np.column_stack([np.ones(400), rng.normal(size=400)]))


@pytest.mark.parametrize(
    "call",
    [
        lambda: cusum_arl(-0.1, 4, 0),
        lambda: cusum_arl(0.5, 0, 0),
        lambda: cusum_arl(0.5, 4, np.inf),
        lambda: cusum_arl(0.5, 4, 0, sides=3),
        lambda: cusum_arl(0.5, 4, 0, head_start=4),
        lambda: cusum_arl(0.5, 4, 0, head_start=-1),
        lambda: cusum_arl(2, 40, 0),
        lambda: ewma_arl(0, 3, 0),
        lambda: ewma_arl(1.5, 3, 0),
        lambda: ewma_arl(0.2, -3, 0),
        lambda: ewma_arl(1e-6, 3, 0),
        lambda: ewma_arl(0.2, 30, 0),
        lambda: durbin_watson_bounds(20, 1, 0),
        lambda: durbin_watson_bounds(20.5, 1, 0.05),
        lambda: durbin_watson_bounds(20, -1, 0.05),
        lambda: durbin_watson_bounds(10**7, 1, 0.05),
    ],
)
def test_parameters_out_of_range(call):
    """Parameters of plain-number functions are checked, also those that double precision cannot serve."""
    with pytest.raises(BadInput):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda x, d: durbin_watson(x[:3], d[:3]),
        lambda x, d: durbin_watson(d[:, 1], d),
        lambda x, d: breusch_godfrey(x[:4], d[:4], 2),
        lambda x, d: breusch_godfrey(np.zeros(30), d[:30], 2),
        lambda x, d: newey_west(x[:2], d[:2], 1),
        lambda x, d: newey_west(x[:9], d[:9], 9),
        lambda x, d: cluster_covariance(x, d, np.zeros(len(x))),
        lambda x, d: ljung_box(x[:5], 5),
        lambda x, d: autocorrelation(x[:5], 5),
        lambda x, d: runs_test(x, 100.0),
        lambda x, d: mann_kendall(x, np.zeros(len(x))),
        lambda x, d: mann_kendall(np.arange(50.0), correction="hamed-rao"),
        lambda x, d: lomb_scargle(np.zeros(len(x)), x),
        lambda x, d: fisher_g(np.arange(40) % 2),
        lambda x, d: durbin_watson_bounds(5, 3, 0.05),
    ],
)
def test_too_little_to_test(call):
    """What is sound but too little, or of the wrong kind, says what is needed and what was got."""
    rng = np.random.default_rng(3)
    with pytest.raises(NotTestable) as caught:
        call(rng.normal(size=400), np.column_stack([np.ones(400), rng.normal(size=400)]))
    assert str(caught.value).startswith("not testable: needs ")


def test_short_series_still_give_their_autocorrelation_time():
    """A random walk is too short for its own time, and the error carries what can be said."""
    walk = np.cumsum(np.random.default_rng(0).normal(size=300))
    with pytest.raises(NotTestable) as caught:
        integrated_time(walk)
    assert caught.value.estimate > 6
    assert math.isfinite(caught.value.estimate)


def test_ten_million_values():
    """Ten million values are answered within seconds, or refused with what would have to be smaller."""
    x = np.random.default_rng(2).normal(size=10_000_000)
    assert 0 < ljung_box(x, 20).pvalue < 1
    assert 0 < fisher_g(x).pvalue <= 1
    assert abs(runs_test(x).statistic) < 5
    with pytest.raises(NotTestable, match="lower the oversampling"):
        lomb_scargle(np.arange(x.size), x)


def test_integers_lists_and_booleans_are_numbers():
    """Lists, integers, booleans and object arrays of numbers give what the floats give."""
    x = np.arange(40) * 7 % 11
    for kind in (x.tolist(), x.astype(np.int16), x.astype(object), x.astype(np.float32)):
        assert ljung_box(kind, 3).statistic == ljung_box(x.astype(float), 3).statistic
    assert runs_test(x > 5, "mean").n_runs == runs_test((x > 5).astype(float), "mean").n_runs


def test_names_are_complete_and_lazy():
    """Every listed name is a function of that name; importing the package loads no heavy library."""
    for name in auditd.stats.__all__:
        assert getattr(auditd.stats, name).__name__ == name
    assert set(auditd.stats.__all__) <= set(dir(auditd.stats))
    with pytest.raises(AttributeError, match="no attribute 'durbin'"):
        _ = auditd.stats.durbin
    code = (
        "import sys, auditd.stats; heavy = {'scipy', 'statsmodels', 'pandas'} & set(sys.modules);"
        "from auditd.stats import cusum; import auditd.stats.cusum; assert callable(auditd.stats.cusum);"
        "sys.exit(bool(heavy))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
