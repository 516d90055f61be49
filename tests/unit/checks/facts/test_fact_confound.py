"""Factors that cannot be told from nuisances."""

import random

import numpy as np
import pytest

from auditd.checks.facts.confound import ConfoundFact
from auditd.checks.facts.crossing import Crossing


def _runs(make_run, n, host_of, build_of=lambda _i, _cell: "b1", seed=4):
    rng = random.Random(seed)
    runs = []
    for i in range(n):
        cell = {"solver": rng.choice(["implicit", "explicit"]), "mesh": rng.choice(["fine", "coarse"])}
        runs.append(make_run(i, cell=cell, nuisance={"host": host_of(i, cell), "build": build_of(i, cell)}))
    return runs


def test_a_level_that_ran_on_one_host_of_its_own_is_not_separable(make_plan, make_run, tell):
    """Every run of explicit ran on n2 and nothing else did: the design with hosts has lost a rank."""
    runs = _runs(make_run, 200, lambda i, cell: "n2" if cell["solver"] == "explicit" else f"n{3 + i % 3}")
    found = tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs)
    (apart,) = found.values()
    assert (apart.key, apart.along, apart.holds, apart.n_again) == (
        "confound:solver:host:apart",
        "host",
        True,
        1,
    )
    assert "not separable" in apart.message
    assert set(apart.cells) in (
        {f"solver={solver} mesh={mesh}" for mesh in ("fine", "coarse")} for solver in ("explicit", "implicit")
    )


def test_a_level_that_ran_on_one_shared_host_is_told_with_what_ran_beside_it(make_plan, make_run, tell):
    """Every run of explicit ran on n2, where others ran too: the comparison rests on those."""
    runs = _runs(make_run, 300, lambda i, cell: "n2" if cell["solver"] == "explicit" else f"n{2 + i % 3}")
    found = tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs)
    (shared,) = found.values()
    assert (shared.key, shared.level) == ("confound:solver:host:explicit", "n2")
    assert "not separable: every run of solver explicit ran on host n2" in shared.message


def test_one_cell_on_one_host_is_found_where_no_level_is(make_plan, make_run, tell):
    """Only the cell explicit and coarse ran on n2 alone; both levels ran elsewhere too."""
    alone = {"solver": "explicit", "mesh": "coarse"}
    runs = _runs(make_run, 400, lambda i, cell: "n2" if cell == alone else f"n{2 + i % 4}")
    (found,) = tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs).values()
    assert found.cells == ("solver=explicit mesh=coarse",)
    assert found.level == "n2"


@pytest.mark.parametrize("seed", range(5))
def test_random_allocation_is_silent(make_plan, make_run, tell, seed):
    """Hosts at random, one of them with most of the runs, and a build that changes for all half-way."""
    rng = random.Random(seed)
    hosts = ["n1"] * 12 + ["n2", "n3", "n4"]
    runs = _runs(make_run, 600, lambda *_: rng.choice(hosts), lambda i, _: "b1" if i < 300 else "b2", seed)
    assert not tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs)


@pytest.mark.parametrize("n_runs_a_host", [1, 2])
def test_hosts_with_a_run_or_two_each_alias_nothing_by_chance(make_plan, make_run, tell, n_runs_a_host):
    """With a host a run every table falls into blocks, and that says nothing."""
    runs = _runs(make_run, 300, lambda i, _: f"n{i // n_runs_a_host}")
    assert not tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs)


def test_fewer_than_twenty_runs_of_a_level_say_nothing_yet(make_plan, make_run, tell):
    """Nineteen runs of explicit, all on n2."""
    runs = [make_run(i, cell={"solver": "explicit"}, nuisance={"host": "n2"}) for i in range(19)]
    runs += [make_run(19 + i, nuisance={"host": f"n{3 + i % 3}"}) for i in range(200)]
    assert not tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs)


def test_aliasing_is_withdrawn_once_the_level_runs_elsewhere(make_plan, make_run, tell):
    """After the first sixty runs of explicit on n2, hosts are mixed."""
    fact = ConfoundFact(make_plan(), alarm_budget=0.01)
    first = _runs(make_run, 120, lambda i, cell: "n2" if cell["solver"] == "explicit" else f"n{3 + i % 3}")
    assert any(finding.holds for finding in tell(fact, first).values())
    rng = random.Random(7)
    found = tell(fact, _runs(make_run, 600, lambda *_: rng.choice(["n2", "n3", "n4", "n5"])))
    assert found
    assert not any(finding.holds for finding in found.values())


def test_partial_aliasing_is_told_by_cramers_v(make_plan, make_run, tell):
    """Nine in ten runs of each solver on a host of its own: V is about 0.8."""
    rng = random.Random(8)
    other = {"implicit": "n2", "explicit": "n1"}
    own = {"implicit": "n1", "explicit": "n2"}
    runs = _runs(make_run, 200, lambda _, cell: (own if rng.random() < 0.9 else other)[cell["solver"]])
    (found,) = tell(ConfoundFact(make_plan(), alarm_budget=0.01), runs).values()
    assert found.key == "confound:solver:host:partial"
    assert found.share == pytest.approx(0.8, abs=0.12)


def test_partial_aliasing_stands_down_to_a_lower_bar():
    """V = 0.45 does not raise it, and does not withdraw it once it stands."""
    table = Crossing()
    for row, column, n in ((0, 0, 290), (0, 1, 110), (1, 0, 110), (1, 1, 290)):
        table.count(row, column, n)
    assert not table.verdicts(set())
    assert [verdict.kind for verdict in table.verdicts({"partial"})] == ["partial"]


def test_corrected_v_agrees_with_a_published_formula_on_a_known_table():
    """Bergsma (2013), worked by hand for the table 30 10 / 10 30: V² = (.25 - 1/79) / (1 - 1/79)."""
    table = Crossing()
    for row, column, n in ((0, 0, 30), (0, 1, 10), (1, 0, 10), (1, 1, 30)):
        table.count(row, column, n)
    by_hand = ((0.25 - 1 / 79) / (1 - 1 / 79)) ** 0.5
    assert table._cramers_v([0, 1], [0, 1]) == pytest.approx((20.0, by_hand), abs=1e-12)


def test_blocks_agree_with_the_rank_of_the_design():
    """The number of blocks is rows + columns - rank, counted by numpy's SVD on random sparse tables."""
    rng = random.Random(9)
    for _ in range(40):
        table, cells = Crossing(), set()
        for _ in range(rng.randrange(4, 14)):
            row, column = rng.randrange(6), rng.randrange(6)
            table.count(row, column, 20)
            cells.add((row, column))
        design = np.zeros((len(cells), 12))
        for k, (row, column) in enumerate(sorted(cells)):
            design[k, row] = design[k, 6 + column] = 1
        n_nodes = len({row for row, _ in cells}) + len({column for _, column in cells})
        assert len(table._blocks()) == n_nodes - np.linalg.matrix_rank(design)
