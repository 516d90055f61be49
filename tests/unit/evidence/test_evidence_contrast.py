"""The honest comparison: what it refuses, what it says, and which way it is computed."""

import subprocess
import sys
import warnings

import numpy as np
import pytest

from auditd.errors import BadInput, NotTestable
from auditd.evidence import contrast


@pytest.fixture
def rng():
    return np.random.default_rng(20)


def two_cells(rng, n=100, shift=0.0):
    cells = rng.permutation(np.repeat(["A", "B"], n // 2))
    return rng.standard_normal(n) + shift * (cells == "B"), cells


def test_estimate_is_b_less_a(rng):
    """The sign of the estimate is that of b − a."""
    values, cells = two_cells(rng, shift=5.0)
    assert contrast(values, cells=cells, a="A", b="B").estimate > 4
    assert contrast(values, cells=cells, a="B", b="A").estimate < -4


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_values_that_are_not_finite_are_refused(rng, bad):
    """NaN and infinities are bad input, counted in the message."""
    values, cells = two_cells(rng)
    values[3] = bad
    with pytest.raises(BadInput, match="1 of 100"):
        contrast(values, cells=cells, a="A", b="B")


@pytest.mark.parametrize(
    ("values", "cells"),
    [
        (np.zeros((3, 3)), ["A", "B", "A"]),
        (["x", "y", "z"], ["A", "B", "A"]),
        ([1.0, 2.0, 3.0], ["A", "B"]),
        ([1.0, 2.0, 3.0], "ABA"),
        ([1.0, 2.0, 3.0], [["A"], ["B"], ["A"]]),
        ([1.0, 2.0, 1e200], ["A", "B", "A"]),
        ([1.0, 2.0, 3.0], [float("nan"), 1.0, 2.0]),
        ([1j, 2.0, 3.0], ["A", "B", "A"]),
    ],
)
def test_malformed_arguments_are_bad_input(values, cells):
    """Wrong shapes, types, lengths and sizes are refused with a message."""
    with pytest.raises(BadInput, match=r".{10}"):
        contrast(values, cells=cells, a="A", b="B")


@pytest.mark.parametrize("confidence", [0.0, 1.0, 95, "high", True])
def test_a_confidence_outside_its_range_is_refused(rng, confidence):
    """Confidence is a share between one half and one."""
    values, cells = two_cells(rng)
    with pytest.raises(BadInput, match="confidence"):
        contrast(values, cells=cells, a="A", b="B", confidence=confidence)


def test_a_cell_is_not_compared_with_itself(rng):
    """Sides that share a cell are bad input."""
    values, cells = two_cells(rng)
    with pytest.raises(BadInput, match="itself"):
        contrast(values, cells=cells, a="A", b=["B", "A"])


@pytest.mark.parametrize(
    ("values", "cells"),
    [
        ([1.0, 2.0, 3.0, 4.0, 5.0], ["A"] * 5),
        ([1.0, 2.0, 3.0, 4.0, 5.0, 6.0], ["A"] * 5 + ["B"]),
        ([2.0] * 10, ["A", "B"] * 5),
        ([2.0, 7.0] * 5, ["A", "B"] * 5),
        ([1.0, 2.0, 3.0, 4.0], ["A", "A", "B", "B"]),
        ([], []),
    ],
)
def test_too_little_is_not_testable(values, cells):
    """One group, a side of one run, constant values and too few runs say what would be needed."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with pytest.raises(NotTestable, match="needs"):
            contrast(values, cells=cells, a="A", b="B")


def test_every_number_of_an_answer_is_finite(rng):
    """An estimable comparison has no NaN in any field."""
    values, cells = two_cells(rng, n=8)
    found = contrast(values, cells=cells, a="A", b="B")
    numbers = [value for value in vars(found).values() if isinstance(value, float)]
    assert len(numbers) > 12
    assert np.isfinite(numbers).all()


def test_one_host_each_cannot_be_separated(rng):
    """All of A on one host and all of B on another: not estimable, and the reason names the hosts."""
    values, cells = two_cells(rng)
    found = contrast(values, cells=cells, a="A", b="B", nuisance={"host": np.where(cells == "A", "n1", "n2")})
    assert not found.estimable
    assert found.estimate is None
    assert found.low is None
    assert "host n1" in found.reason
    assert "n2" in found.reason
    assert found.naive_low is not None


def test_hosts_nested_in_cells_cannot_be_separated(rng):
    """Four hosts that ran only A and four that ran only B: no host ran both."""
    cells = np.repeat(["A", "B"], 100)
    host = np.concatenate((np.arange(100) % 4, 4 + np.arange(100) % 4))
    found = contrast(rng.standard_normal(200), cells=cells, a="A", b="B", nuisance={"host": host})
    assert not found.estimable
    assert "no host ran both" in found.reason


def test_many_hosts_nested_in_cells_cannot_be_separated_either(rng):
    """Nesting is seen also where levels are many."""
    cells = np.repeat(["A", "B"], 300)
    found = contrast(
        rng.standard_normal(600), cells=cells, a="A", b="B", nuisance={"host": np.arange(600) // 3}
    )
    assert not found.estimable


def test_one_run_a_host_is_said_and_not_called_nested(rng):
    """With one run a host there is no host effect to tell; the comparison stands and says so."""
    values, cells = two_cells(rng)
    found = contrast(values, cells=cells, a="A", b="B", nuisance={"host": np.arange(100)})
    assert found.estimable
    assert any("one run a level" in remark for remark in found.remarks)


def test_a_host_that_every_cell_met_is_a_block(rng):
    """A large host effect crossed with the cells costs nothing: the interval is far narrower than the naive
    one."""
    host = np.arange(240) % 6
    cells = (np.arange(240) // 6) % 2
    values = rng.standard_normal(240) + 20 * rng.standard_normal(6)[host]
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    assert "host as block" in found.method
    assert found.high - found.low < 0.2 * (found.naive_high - found.naive_low)
    assert found.n_effective > 240


def test_a_host_that_one_cell_missed_is_a_random_effect(rng):
    """Partly crossed hosts are random effects."""
    host = np.arange(240) % 6
    cells = np.where(host == 5, 0, (np.arange(240) // 6) % 2)
    found = contrast(rng.standard_normal(240), cells=cells, a=0, b=1, nuisance={"host": host})
    assert "host as random effect" in found.method


def test_more_than_forty_levels_are_clusters(rng):
    """Very many hosts are clusters, and their own spread enters the variance."""
    host = np.repeat(np.arange(100), 6)
    cells = np.arange(600) % 2
    values = rng.standard_normal(600) + 3 * rng.standard_normal(100)[host]
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host})
    assert "clusters" in found.method
    assert found.high - found.low < 0.5 * (found.naive_high - found.naive_low)


def test_hosts_with_differences_of_their_own_widen_the_interval(rng):
    """Host × cell variance is the error of a claim about hosts in general."""
    host, cells = np.arange(400) % 8, (np.arange(400) // 8) % 2
    noise = rng.standard_normal(400)
    plain = contrast(noise, cells=cells, a=0, b=1, nuisance={"host": host})
    own = contrast(
        noise + 2 * rng.standard_normal((8, 2))[host, cells], cells=cells, a=0, b=1, nuisance={"host": host}
    )
    assert "host × cell as error" in own.method
    assert own.high - own.low > 3 * (plain.high - plain.low)
    assert own.df < 12


def test_lists_are_matched_and_weigh_equally(rng):
    """A side of two cells is their equally weighted mean, whatever the cells' sizes; a pair without runs is
    left out."""
    cells = np.array(["a1"] * 40 + ["a2"] * 10 + ["b1"] * 10 + ["b2"] * 40)
    level = {"a1": 0.0, "a2": 10.0, "b1": 2.0, "b2": 14.0}
    values = np.array([level[c] for c in cells]) + 0.01 * rng.standard_normal(100)
    found = contrast(values, cells=cells, a=["a1", "a2"], b=["b1", "b2"])
    assert found.estimate == pytest.approx(3.0, abs=0.05)
    partial = contrast(values, cells=cells, a=["a1", "a2"], b=["b1", "b3"])
    assert partial.estimate == pytest.approx(2.0, abs=0.05)
    assert any("left out" in remark for remark in partial.remarks)


def test_tuples_may_be_labels(rng):
    """A cell's label may be a tuple of levels."""
    cells = [("implicit", "fine"), ("explicit", "fine")] * 30
    values = rng.standard_normal(60)
    found = contrast(values, cells=cells, a=("implicit", "fine"), b=("explicit", "fine"))
    assert found.estimate == pytest.approx(values[1::2].mean() - values[::2].mean(), abs=0.2)


def test_hundreds_of_cells_are_compared_by_centring(rng):
    """With more cells than columns, runs are centred within their cells and the equal weights stay."""
    cells = np.repeat(np.arange(200), 5)
    values = rng.standard_normal(1000) + (cells >= 100) * 1.0
    order = rng.permutation(1000)
    found = contrast(values[order], cells=cells[order], a=list(range(100)), b=list(range(100, 200)))
    means = np.array([values[cells == c].mean() for c in range(200)])
    assert found.estimate == pytest.approx(means[100:].mean() - means[:100].mean(), abs=0.05)
    assert found.high - found.low == pytest.approx(2 * 1.96 * np.sqrt(4 / 1000), rel=0.15)


def test_seed_blocks_are_compared_by_differences(rng):
    """Common random numbers: a shared part of ten times the noise does not widen the interval."""
    block = np.repeat(np.arange(50), 2)
    cells = np.tile([0, 1], 50)
    values = 10 * rng.standard_normal(50)[block] + rng.standard_normal(100)
    found = contrast(values, cells=cells, a=0, b=1, blocks=block)
    assert "seed blocks" in found.method
    assert found.high - found.low < 0.3 * (found.naive_high - found.naive_low)


def test_hosts_that_vary_within_seed_blocks_are_taken_off(rng):
    """A host effect met by chance on either side of a block does not stay in the differences."""
    block, cells = np.repeat(np.arange(100), 2), np.tile([0, 1], 100)
    host = rng.integers(0, 4, 200)
    values = rng.standard_normal(100)[block] + 0.1 * rng.standard_normal(200) + np.array([0, 5, -5, 9])[host]
    found = contrast(values, cells=cells, a=0, b=1, blocks=block, nuisance={"host": host})
    assert found.high - found.low < 0.2


def test_hosts_of_whole_seed_blocks_may_differ_in_the_difference(rng):
    """Where each block ran on one host, a difference of the host's own is the error."""
    block, cells = np.repeat(np.arange(120), 2), np.tile([0, 1], 120)
    host = block % 6
    values = 0.1 * rng.standard_normal(240) + cells * rng.standard_normal(6)[host]
    found = contrast(values, cells=cells, a=0, b=1, blocks=block, nuisance={"host": host})
    assert "host × cell as error" in found.method
    assert found.df < 8


def test_few_complete_blocks_leave_an_unpaired_comparison(rng):
    """Blocks that hold only one side cannot be differences."""
    values, cells = two_cells(rng)
    found = contrast(values, cells=cells, a="A", b="B", blocks=np.arange(100))
    assert "seed blocks" not in found.method


def test_strong_serial_errors_in_blocks_of_order_widen_the_interval(rng):
    """A before B under an AR(1) of 0.9: far wider than the naive interval, and weak."""
    from scipy.signal import lfilter

    values = lfilter([1.0], [1.0, -0.9], rng.standard_normal(200))
    found = contrast(values, cells=np.repeat([0, 1], 100), a=0, b=1)
    assert found.high - found.low > 1.5 * (found.naive_high - found.naive_low)
    assert found.loss > 0.5


def test_a_longer_memory_than_ar1_is_fitted_as_such(rng):
    """A second-order autoregression is called by its order."""
    from scipy.signal import lfilter

    values = lfilter([1.0], [1.0, -0.3, -0.5], rng.standard_normal(800))
    found = contrast(values, cells=rng.integers(0, 2, 800), a=0, b=1)
    assert "AR(1)" not in found.method


def test_a_comparison_on_few_effective_runs_is_weak(rng):
    """Fewer than ten effective runs a side is said."""
    values, cells = two_cells(rng, n=14)
    found = contrast(values, cells=cells, a="A", b="B")
    assert found.weak
    assert any("weak" in remark for remark in found.remarks)


def test_the_any_time_interval_holds_the_fixed_one(rng):
    """What holds at every look is wider than what holds at one."""
    values, cells = two_cells(rng, n=300)
    found = contrast(values, cells=cells, a="A", b="B")
    assert found.low_any < found.low < found.high < found.high_any


def test_more_confidence_is_a_wider_interval(rng):
    """Intervals grow with the confidence."""
    values, cells = two_cells(rng)
    narrow = contrast(values, cells=cells, a="A", b="B", confidence=0.8)
    wide = contrast(values, cells=cells, a="A", b="B", confidence=0.99)
    assert wide.low < narrow.low
    assert wide.high_any - wide.low_any > narrow.high_any - narrow.low_any


def test_large_offsets_and_tiny_spreads_are_computed(rng):
    """Values of size 1e9 with spread 1e-3, and of size 1e-160, give the interval of their own scale."""
    values, cells = two_cells(rng)
    plain = contrast(values, cells=cells, a="A", b="B")
    offset = contrast(1e9 + 1e-3 * values, cells=cells, a="A", b="B")
    assert offset.high - offset.low == pytest.approx(1e-3 * (plain.high - plain.low), rel=1e-3)
    tiny = contrast(1e-160 * values, cells=cells, a="A", b="B")
    assert tiny.high - tiny.low == pytest.approx(1e-160 * (plain.high - plain.low), rel=1e-6)


def test_importing_the_package_loads_neither_scipy_nor_statsmodels():
    """Query commands may import the package: it is light."""
    code = "import sys, auditd.evidence; print({'scipy', 'statsmodels', 'matplotlib'} & set(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "set()"


@pytest.mark.slow
def test_a_million_runs_are_compared_in_seconds(rng):
    """Cost is linear in the runs: ten times the runs take less than twenty-five times the processor time."""
    import time

    cells = np.arange(1_000_000) % 2
    host = (np.arange(1_000_000) // 2) % 8
    values = rng.standard_normal(1_000_000)
    spent = []
    for n in (100_000, 1_000_000):
        start = time.process_time()
        found = contrast(values[:n], cells=cells[:n], a=0, b=1, nuisance={"host": host[:n]})
        spent.append(time.process_time() - start)
        assert found.n_effective == pytest.approx(n, rel=0.9)
    assert spent[1] < 25 * spent[0]
    assert spent[1] < 10
