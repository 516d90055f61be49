"""Schedules are balanced, orthogonal, interleaved, and have distinct seeds."""

import collections
import csv
import io

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.records import cell_label
from auditd.schedule import LandedRun, randomised_blocks, rest, schedule_csv, schedule_document

LEVELS = {"solver": ["implicit", "explicit"], "mesh": ["fine", "middle", "coarse"]}
HOSTS = ["n1", "n2", "n3"]


@pytest.fixture(scope="module")
def schedule():
    return randomised_blocks(LEVELS, HOSTS, 7, seed=11)


def test_every_block_holds_every_cell_once_on_one_host(schedule):
    blocks = collections.defaultdict(list)
    for run in schedule.runs:
        blocks[run.block].append(run)
    assert len(blocks) == 21
    for name, runs in blocks.items():
        assert {run.host for run in runs} == {name.split("/")[0]}
        assert len({cell_label(run.cell) for run in runs}) == len(runs) == 6
    assert (schedule.blocks, schedule.efficiency) == ("complete", 1.0)


def test_cells_are_orthogonal_to_blocks_hosts_and_factors_to_each_other(schedule):
    """In a complete design, centred indicator columns of cells and of blocks have inner product zero."""

    def indicators(labels):
        levels = sorted(set(labels))
        columns = np.array([[label == level for level in levels] for label in labels], dtype=float)
        return columns - columns.mean(axis=0)

    cells = indicators([cell_label(run.cell) for run in schedule.runs])
    blocks = indicators([run.block for run in schedule.runs])
    solver = indicators([run.cell["solver"] for run in schedule.runs])
    mesh = indicators([run.cell["mesh"] for run in schedule.runs])
    assert np.abs(cells.T @ blocks).max() < 1e-9
    assert np.abs(solver.T @ mesh).max() < 1e-9
    assert np.abs(cells.T @ indicators([run.host for run in schedule.runs])).max() < 1e-9


def test_seeds_are_distinct_128_bit_texts_that_follow_from_the_entropy(schedule):
    seeds = [run.seed for run in schedule.runs]
    assert len(set(seeds)) == len(seeds) == 126
    assert all(0 <= int(seed) < 2**128 for seed in seeds)
    assert max(int(seed) for seed in seeds) > 2**120
    child = np.random.SeedSequence(11, spawn_key=(1, 0)).generate_state(4, np.uint32)
    assert seeds[0] == str(sum(int(word) << (32 * i) for i, word in enumerate(child)))
    assert schedule.entropy == "11"


def test_hosts_run_side_by_side(schedule):
    """Each three runs in turn are one of each host, and the hosts' order changes."""
    hosts = [run.host for run in schedule.runs]
    steps = [tuple(hosts[i : i + 3]) for i in range(0, len(hosts), 3)]
    assert all(set(step) == set(HOSTS) for step in steps)
    assert len(set(steps)) > 1
    assert [run.sequence for run in schedule.runs] == list(range(1, 127))


def test_orders_are_uniform_over_permutations():
    """Each of the 6 orders of three cells has probability 1/6; chi-squared(5) exceeds 25.7 once in 10,000."""
    made = randomised_blocks({"a": [1, 2, 3]}, (), 3000, seed=5)
    orders = collections.Counter(
        tuple(run.cell["a"] for run in made.runs[i : i + 3]) for i in range(0, len(made.runs), 3)
    )
    assert len(orders) == 6
    assert sum((count - 500) ** 2 / 500 for count in orders.values()) < 25.7


def test_same_seed_same_schedule_and_other_seed_another():
    once, again, other = (randomised_blocks(LEVELS, HOSTS, 3, seed=seed) for seed in (1, 1, 2))
    assert once == again
    assert once.runs != other.runs
    assert randomised_blocks(LEVELS, HOSTS, 3).entropy != randomised_blocks(LEVELS, HOSTS, 3).entropy


def test_drawn_entropy_makes_the_schedule_again():
    drawn = randomised_blocks(LEVELS, HOSTS, 2)
    assert randomised_blocks(LEVELS, HOSTS, 2, seed=int(drawn.entropy)) == drawn


def test_incomplete_blocks_are_balanced_and_their_efficiency_is_below_one():
    made = randomised_blocks(LEVELS, HOSTS, 10, seed=3, block_size=4)
    counts = collections.Counter(cell_label(run.cell) for run in made.runs)
    assert set(counts.values()) == {20}
    sizes = collections.Counter(run.block for run in made.runs)
    assert set(sizes.values()) == {4}
    bound = (6 * 3) / (4 * 5)  # t(k−1) / (k(t−1)), the efficiency of a balanced design, none is better
    assert made.blocks == "incomplete"
    assert 0.97 * bound < made.efficiency <= bound + 1e-12


def test_rest_leaves_out_what_has_landed_by_seed_and_by_cell_and_host(schedule):
    by_seed = [LandedRun(cell=run.cell, host=run.host, seed=run.seed) for run in schedule.runs[:50]]
    assert rest(schedule, by_seed).runs == schedule.runs[50:]
    own_seeds = [
        LandedRun(cell=run.cell, host=run.host, seed=f"own {run.seed}") for run in schedule.runs[:50]
    ]
    assert rest(schedule, own_seeds).runs == schedule.runs[50:]
    elsewhere = [LandedRun(cell=schedule.runs[0].cell, host="unknown")]
    assert rest(schedule, elsewhere).runs == schedule.runs


def test_document_and_table_say_the_same(schedule):
    document = schedule_document(schedule)
    rows = list(csv.DictReader(io.StringIO(schedule_csv(schedule), newline="")))
    assert set(document) == {"schema", "entropy", "blocks", "efficiency", "runs"}
    assert len(rows) == len(document["runs"]) == 126
    for row, run in zip(rows, document["runs"], strict=True):
        assert (int(row["sequence"]), row["block"], row["host"]) == (
            run["sequence"],
            run["block"],
            run["host"],
        )
        assert {name: row[name] for name in LEVELS} == run["cell"]
        assert row["seed"] == run["seed"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"levels": {}}, "no factor"),
        ({"levels": {"a": [1, 1]}}, "distinct"),
        ({"levels": {"a": [1, 2]}, "hosts": ["x", "x"]}, "hosts must be distinct"),
        ({"levels": {"a": [1, 2]}, "replicates": 0}, "replicates is 0"),
        ({"levels": {"a": [1, 2]}, "seed": -1}, "seed is -1"),
        ({"levels": {"a": [1, 2, 3]}, "block_size": 1}, "block_size is 1"),
        ({"levels": {"a": [1, 2, 3, 4]}, "replicates": 1, "block_size": 2}, "add replicates"),
        ({"levels": {"a": [1, 2, 3, 4]}, "replicates": 2, "block_size": 2}, "share no block"),
        ({"levels": {"a": list(range(1000)), "b": list(range(1001))}, "replicates": 1}, "at most"),
    ],
)
def test_malformed_requests_say_what_is_wrong(arguments, message):
    with pytest.raises(BadInput, match=message):
        randomised_blocks(**arguments)


def test_one_and_true_are_two_levels():
    """Levels are JSON values: 1 and true differ, though Python calls them equal."""
    assert len(randomised_blocks({"a": [1, True]}, (), 1, seed=0).runs) == 2
