"""E-processes that count: order of levels, concentration of failures."""

import math
from itertools import product

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.sequential import LevelOrder, RateConcentration, cells_within_stages, seed_blocks


def order_of(levels):
    process = LevelOrder()
    return np.array([process.observe(str(level)) for level in levels])


def rates_of(levels, failed):
    process = RateConcentration()
    path = [process.observe(str(level), failed=bool(bad)) for level, bad in zip(levels, failed, strict=True)]
    return np.array(path), process


def test_all_of_one_level_before_the_other_is_found_soon_and_blocks_stay_silent():
    """AAAA…BBBB alarms within a dozen runs of B; complete blocks in random order never do."""
    path = order_of(["a"] * 20 + ["b"] * 20)
    assert 20 < int(np.argmax(path > math.log(20 * 7))) < 32
    rng = np.random.default_rng(1)
    blocked = order_of(np.concatenate([rng.permutation(4) for _ in range(60)]))
    assert blocked.max() < 1e-9


@pytest.mark.parametrize("shares", [(0.5, 0.5), (0.8, 0.1, 0.1)])
def test_level_order_has_mean_at_most_one_under_independent_levels(shares):
    """Exact enumeration of all sequences of seven runs: E[e] ≤ 1 at every length."""
    n = 7
    total = np.zeros(n)
    for sequence in product(range(len(shares)), repeat=n):
        total += np.prod([shares[x] for x in sequence]) * np.exp(order_of(sequence))
    assert (total <= 1.0 + 1e-12).all()


def test_level_order_has_mean_at_most_one_under_a_random_permutation():
    """Also where the levels' counts are fixed and only their order is random."""
    from itertools import permutations

    orders = set(permutations((0, 0, 0, 1, 1, 2)))
    total = sum(np.exp(order_of(order)) for order in orders) / len(orders)
    assert (total <= 1.0 + 1e-12).all()


@pytest.mark.parametrize("rate", [0.02, 0.3, 0.5])
def test_rates_have_mean_at_most_one_under_one_rate(rate):
    """Exact enumeration of all outcomes of nine runs over three levels."""
    n, levels = 9, [0, 1, 2, 1, 0, 0, 2, 1, 0]
    total = np.zeros(n)
    for failed in product((0, 1), repeat=n):
        weight = math.prod(rate if bad else 1 - rate for bad in failed)
        total += weight * np.exp(rates_of(levels, failed)[0])
    assert (total <= 1.0 + 1e-12).all()


def test_failures_in_one_level_and_in_a_spell_are_found():
    """One level failing at 0.3 against 0.02 is named; a spell of 40 runs at 0.6 alarms within it."""
    rng = np.random.default_rng(2)
    level = rng.integers(4, size=600)
    path, process = rates_of(level, rng.random(600) < np.where(level == 2, 0.3, 0.02))
    assert path[-1] > math.log(140)
    assert process.level == "2"
    spell = np.full(600, 0.01)
    spell[300:340] = 0.6
    path, _ = rates_of(level, rng.random(600) < spell)
    assert 300 < int(np.argmax(path > math.log(140))) < 340


def test_both_continue_from_their_state():
    """A state in the middle and the whole way agree."""
    rng = np.random.default_rng(3)
    level, failed = rng.integers(3, size=80), rng.random(80) < 0.2
    order, rates = LevelOrder(), RateConcentration()
    for t in range(40):
        order.observe(str(level[t]))
        rates.observe(str(level[t]), failed=bool(failed[t]))
    order, rates = LevelOrder.from_state(**order.state()), RateConcentration.from_state(**rates.state())
    for t in range(40, 80):
        order.observe(str(level[t]))
        rates.observe(str(level[t]), failed=bool(failed[t]))
    assert order.log_e == pytest.approx(order_of(level)[-1], abs=1e-9)
    assert rates.log_e == pytest.approx(rates_of(level, failed)[0][-1], abs=1e-9)


def test_cells_within_stages_keep_different_pairs_apart():
    """No two pairs of stage and cell share a label; with a random order the stage alone decides."""
    cells, stages = ["a|b", "b", "a|b"], ["1", "1|a", "1"]
    assert len(set(cells_within_stages(cells, stages))) == 2
    assert cells_within_stages(cells, stages, drawn_at_random=True) == stages
    with pytest.raises(BadInput):
        cells_within_stages(cells, stages[:2])


def test_seed_blocks_are_complete_blocks_in_order_of_completion():
    """Means and Helmert contrasts by hand; incomplete blocks and lost values wait."""
    found = seed_blocks(
        [1.0, 3.0, 2.0, 8.0, np.nan, 5.0], ["a", "b", "b", "a", "a", "b"], ["1", "1", "2", "2", "3", "3"]
    )
    assert found.mean.tolist() == [2.0, 5.0]
    assert found.mean_index.tolist() == [1, 3]
    assert found.contrast.tolist() == [2.0, -6.0]
    assert found.contrast_index.tolist() == [1, 2]
    assert found.contrast_cells == ["b", "b"]
    with pytest.raises(BadInput):
        seed_blocks([1.0, 2.0], ["a", "a"], ["1", "2"])
