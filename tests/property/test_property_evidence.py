"""Invariances of the evidence: units, names, sides and inputs that stay as they were."""

import contextlib

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from auditd.errors import BadInput, NotTestable
from auditd.evidence import contrast, effective_number

SCALED = ("estimate", "low", "high", "low_any", "high_any", "naive_low", "naive_high")
SHIFTLESS = ("n_effective", "loss", "hedges_g", "df")


@st.composite
def campaigns(draw):
    """A seeded campaign: 20–120 runs, two or three cells, hosts, perhaps serial errors."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    n = draw(st.integers(20, 120))
    cells = rng.integers(0, draw(st.integers(2, 3)), n)
    cells[:4] = [0, 1, 0, 1]
    host = rng.integers(0, draw(st.integers(1, 5)), n)
    values = rng.standard_normal(n)
    if draw(st.booleans()):
        values = np.cumsum(values)
    return values, cells, host


def lenient(test):
    return settings(max_examples=30, deadline=None, suppress_health_check=[HealthCheck.too_slow])(test)


@lenient
@given(campaigns(), st.floats(1e-6, 1e6), st.floats(-1e3, 1e3), st.booleans())
def test_a_comparison_follows_units(campaign, scale, shift, with_hosts):
    """y → scale·y + shift scales estimate and limits, and leaves effective numbers and standardised
    effects."""
    values, cells, host = campaign
    nuisance = {"host": host} if with_hosts else {}
    first = contrast(values, cells=cells, a=0, b=1, nuisance=nuisance)
    second = contrast(scale * (values + shift), cells=cells, a=0, b=1, nuisance=nuisance)
    assert first.estimable == second.estimable
    if not first.estimable:
        return
    size = scale * (first.high - first.low)
    for name in SCALED:
        assert getattr(second, name) == pytest.approx(scale * getattr(first, name), rel=1e-4, abs=1e-4 * size)
    for name in SHIFTLESS:
        assert getattr(second, name) == pytest.approx(getattr(first, name), rel=1e-3, abs=1e-3)


@lenient
@given(campaigns())
def test_sides_exchanged_turn_the_sign(campaign):
    """a and b exchanged: estimate and limits turn their sign, nothing else moves."""
    values, cells, host = campaign
    there = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    back = contrast(values, cells=cells, a=1, b=0, nuisance={"host": host})
    if there.estimable:
        size = there.high - there.low
        assert back.estimate == pytest.approx(-there.estimate, abs=1e-6 * size)
        assert back.low == pytest.approx(-there.high, abs=1e-6 * size)
        assert back.high_any == pytest.approx(-there.low_any, abs=1e-6 * size)
        assert back.n_effective == pytest.approx(there.n_effective, rel=1e-6)


@lenient
@given(campaigns(), st.permutations(["x", "y", "z"]), st.permutations([10, 20, 30, 40, 50]))
def test_names_do_not_matter(campaign, cell_names, host_names):
    """Cells and hosts by other names: the same comparison and the same effective number."""
    values, cells, host = campaign
    named = [cell_names[c] for c in cells]
    hosts = [host_names[h] for h in host]
    first = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    second = contrast(values, cells=named, a=cell_names[0], b=cell_names[1], nuisance={"machine": hosts})
    assert first.estimable == second.estimable
    if first.estimable:
        assert second.low == pytest.approx(first.low, rel=1e-6, abs=1e-9)
        assert second.df == pytest.approx(first.df, rel=1e-6)
    one = effective_number(values, cells=cells, nuisance={"host": host})
    two = effective_number(values, cells=named, nuisance={"machine": hosts})
    assert two.n_effective == pytest.approx(one.n_effective, rel=1e-6)
    assert two.loss_high == pytest.approx(one.loss_high, rel=1e-6, abs=1e-9)


@lenient
@given(campaigns(), st.floats(1e-6, 1e6), st.floats(-1e3, 1e3))
def test_an_effective_number_has_no_unit(campaign, scale, shift):
    """y → scale·y + shift leaves it."""
    values, cells, host = campaign
    one = effective_number(values, cells=cells, nuisance={"host": host})
    two = effective_number(scale * (values + shift), cells=cells, nuisance={"host": host})
    assert two.n_effective == pytest.approx(one.n_effective, rel=1e-3)


@lenient
@given(campaigns())
def test_inputs_stay_as_they_were(campaign):
    """No argument is changed, and read-only arrays are taken."""
    values, cells, host = campaign
    parents = np.where(np.arange(len(values)) % 5 == 0, -1, np.arange(len(values)) - 1)
    arrays = [values, cells, host, parents]
    copies = [array.copy() for array in arrays]
    for array in arrays:
        array.setflags(write=False)
    contrast(values, cells=cells, a=0, b=1, nuisance={"host": host}, blocks=host)
    effective_number(values, cells=cells, nuisance={"host": host}, duplicates=host < 0, parents=parents)
    for array, copy in zip(arrays, copies, strict=True):
        assert np.array_equal(array, copy)


@lenient
@given(campaigns())
def test_intervals_are_ordered(campaign):
    """Every interval holds its estimate, and losses their bounds."""
    values, cells, host = campaign
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    if found.estimable:
        assert found.low_any <= found.low <= found.estimate <= found.high <= found.high_any
        assert found.g_low <= found.hedges_g <= found.g_high
        assert found.loss_low <= found.loss + 1e-9
        assert found.loss <= found.loss_high + 1e-9
    number = effective_number(values, cells=cells, nuisance={"host": host})
    assert number.n_effective > 0
    assert number.loss_low <= number.loss <= number.loss_high


def hostile_values(rng, n, cells):
    """Shapes of response that break careless code: ties, a lone outlier, one constant side, heavy tails, a
    ramp, huge sizes."""
    return {
        "ties": rng.integers(0, 3, n).astype(float),
        "outlier": np.r_[1.0, np.zeros(n - 1)],
        "constant side": np.where(cells == 0, 1.0, rng.standard_normal(n)),
        "heavy": rng.standard_cauchy(n),
        "lognormal": np.exp(3 * rng.standard_normal(n)),
        "ramp": np.arange(n) * 1.0,
        "wander": np.cumsum(rng.standard_normal(n)),
        "huge": 1e140 * rng.standard_normal(n),
        "tiny": 1e-140 * rng.standard_normal(n),
    }


def hostile_nuisances(rng, n, cells):
    """Levels at random, sorted, aliased with the cells, one run each, very many, in blocks of the order."""
    return {
        "random": rng.integers(0, 6, n),
        "sorted": np.sort(rng.integers(0, 6, n)),
        "aliased": cells % 3,
        "unit": np.arange(n),
        "many": rng.integers(0, 60, n),
        "blocks": np.arange(n) * 5 // n,
    }


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, 2**32 - 1),
    st.sampled_from([4, 5, 7, 10, 15, 30, 60, 150]),
    st.sampled_from([2, 3, 6, 20, 100]),
)
def test_hostile_campaigns_get_an_answer_or_a_refusal(seed, n, n_cells):
    """Whatever comes: finite numbers, or BadInput or NotTestable; never NaN, never a warning of numpy's
    (pytest makes those errors)."""
    rng = np.random.default_rng(seed)
    cells = rng.integers(0, n_cells, n)
    values = rng.choice(list(hostile_values(rng, n, cells).values()))
    offered = hostile_nuisances(rng, n, cells)
    nuisance = {
        name: offered[name] for name in rng.choice(list(offered), int(rng.integers(0, 4)), replace=False)
    }
    blocks = None if rng.random() < 0.6 else rng.integers(0, max(n // 2, 1), n)
    back = np.maximum(np.arange(n) - rng.integers(1, 5, n), -1)
    with contextlib.suppress(BadInput, NotTestable):
        found = contrast(values, cells=cells, a=[0, 2], b=[1, 3], nuisance=nuisance, blocks=blocks)
        assert np.isfinite([x for x in vars(found).values() if isinstance(x, float)]).all()
        assert found.estimable == (found.reason is None)
    with contextlib.suppress(BadInput, NotTestable):
        number = effective_number(
            values, cells=cells, nuisance=nuisance, parents=back, duplicates=rng.integers(0, n, n)
        )
        assert np.isfinite(
            [number.n_effective, number.loss_low, number.loss_high, *number.parts.values()]
        ).all()
        assert np.prod(list(number.parts.values())) == pytest.approx(number.n_effective / n, rel=1e-6)
