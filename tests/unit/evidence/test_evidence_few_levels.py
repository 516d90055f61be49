"""Two levels of a nuisance are no sample of others, three are; hosts that differ ask for more hosts."""

import numpy as np
import pytest

from auditd.evidence import contrast


@pytest.fixture
def rng():
    return np.random.default_rng(22)


def two_builds(rng, n=800, own=0.0):
    """Two cells in turn on two builds, the second from three fifths on, with a difference of its own."""
    cells, build = np.arange(n) % 2, (np.arange(n) >= 0.6 * n).astype(int)
    return rng.standard_normal(n) + 0.5 * build + own * build * cells, cells, build


def test_two_builds_are_a_block_and_the_claim_is_for_them(rng):
    """Two levels are no sample of builds: the interval is about the naive one, and a remark says for what."""
    values, cells, build = two_builds(rng)
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"build": build})
    assert "build as block" in found.method
    assert "× cell" not in found.method
    assert 0.8 < (found.high - found.low) / (found.naive_high - found.naive_low) < 1.1
    assert any("these 2 levels" in r and "cannot be judged from 2" in r for r in found.remarks)


def test_a_difference_that_depends_on_one_of_two_builds_is_remarked(rng):
    """The interval holds for the builds as the runs weigh them, and the remark says to compare them apart."""
    values, cells, build = two_builds(rng, own=2.0)
    found = contrast(values, cells=cells, a=0, b=1, nuisance={"build": build})
    assert found.low < 0.4 * 2.0 < found.high
    assert found.high - found.low < 0.4
    assert any("not the same on them" in remark for remark in found.remarks)


def test_two_builds_of_whole_seed_blocks_are_not_the_error_either(rng):
    """Differences of blocks on two builds: no build × cell with one degree of freedom."""
    block, cells = np.repeat(np.arange(120), 2), np.tile([0, 1], 120)
    values = rng.standard_normal(120)[block] + 0.1 * rng.standard_normal(240)
    found = contrast(values, cells=cells, a=0, b=1, blocks=block, nuisance={"build": block % 2})
    assert "× cell" not in found.method
    assert found.df > 50
    assert any("these 2 levels" in remark for remark in found.remarks)


def test_three_hosts_are_a_sample_of_hosts(rng):
    """From three levels on, hosts × cell is the error of a claim about hosts in general."""
    host, cells = np.arange(240) % 3, (np.arange(240) // 3) % 2
    found = contrast(rng.standard_normal(240), cells=cells, a=0, b=1, nuisance={"host": host})
    assert "host × cell as error" in found.method
    assert not any("the claim is for" in remark for remark in found.remarks)


def test_hosts_that_differ_in_the_difference_ask_for_more_hosts(rng):
    """Where hosts' own differences make the interval, a remark asks for more of them."""
    host, cells = np.arange(4000) % 6, (np.arange(4000) // 6) % 2
    own = np.array([-2.0, -1, 0, 0.5, 1, 2])[host] * cells
    found = contrast(rng.standard_normal(4000) + own, cells=cells, a=0, b=1, nuisance={"host": host})
    assert found.floor_of == "host"
    assert 0.9 * (found.high - found.low) / 2 < found.floor < (found.high - found.low) / 2
    assert any("more levels narrow it" in remark for remark in found.remarks)
