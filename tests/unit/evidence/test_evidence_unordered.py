"""Where no order is known, no dependence in time is counted, and a remark says so."""

import numpy as np
import pytest
from scipy.signal import lfilter

from auditd.evidence import contrast, effective_number, evidence_loss


@pytest.fixture
def rng():
    return np.random.default_rng(23)


@pytest.mark.parametrize("blocks", [None, np.tile(np.arange(100), 2)], ids=["single runs", "seed blocks"])
def test_without_an_order_nothing_in_time_is_counted(blocks):
    """An AR(1) of 0.9 with a before b: wide with an order; without one Welch's interval, or the paired
    one."""
    values = lfilter([1.0], [1.0, -0.9], np.random.default_rng(3).standard_normal(200))
    cells = np.repeat([0, 1], 100)
    known = contrast(values, cells=cells, a=0, b=1, blocks=blocks)
    unknown = contrast(values, cells=cells, a=0, b=1, blocks=blocks, ordered=False)
    assert "AR(" in known.method
    assert "AR(" not in unknown.method
    assert "along" not in unknown.method
    assert any("no order is known" in remark for remark in unknown.remarks)
    difference = values[100:] - values[:100]
    half = 1.984 * difference.std(ddof=1) / 10
    if blocks is None:
        half = (unknown.naive_high - unknown.naive_low) / 2
    assert (unknown.high - unknown.low) / 2 == pytest.approx(half, rel=0.02)
    assert known.high - known.low > 2 * (unknown.high - unknown.low)


def test_without_an_order_hosts_still_count():
    """A random host effect and hosts × cell stay in the model when no order is known."""
    rng = np.random.default_rng(4)
    host, cells = np.arange(240) % 6, (np.arange(240) // 6) % 2
    cells[host == 5] = 0
    values = rng.standard_normal(240) + 10 * rng.standard_normal(6)[host]
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"host": host}, ordered=False)
    assert "host as random effect" in found.method
    assert "host × cell as error" in found.method
    assert found.low < 0 < found.high
    assert found.high - found.low < 0.7 * (found.naive_high - found.naive_low)


def test_without_an_order_nothing_in_time_costs_runs(rng):
    """An AR(1) of 0.9 with a step: every run counts, nothing is lost, and a remark says why."""
    values = lfilter([1.0], [1.0, -0.9], rng.standard_normal(600)) + 20 * (np.arange(600) > 300)
    known = effective_number(values, cells=[0] * 600)
    unknown = effective_number(values, cells=[0] * 600, ordered=False)
    assert known.n_effective < 60
    assert unknown.n_effective == pytest.approx(600)
    assert unknown.detail["steps"] == 0
    assert any("no order is known" in remark for remark in unknown.remarks)


def test_without_an_order_levels_still_cost_runs(rng):
    """Six hosts far apart are worth about six runs, whether the order is known or not."""
    host = np.arange(600) % 6
    values = 0.01 * rng.standard_normal(600) + rng.standard_normal(6)[host]
    found = effective_number(values, cells=[0] * 600, nuisance={"host": host}, ordered=False)
    assert found.n_effective == pytest.approx(6, rel=0.02)


def test_the_loss_of_a_comparison_without_an_order_is_small(rng):
    """A before B under an AR(1) of 0.8 loses nothing that could be known."""
    values = lfilter([1.0], [1.0, -0.8], rng.standard_normal(600))
    cells = np.repeat([0, 1], 300)
    assert evidence_loss(values, cells=cells, a=0, b=1, ordered=False).low < 0.05
    assert evidence_loss(values, cells=cells, ordered=False).low < 0.05
