"""Randomised block run orders: every block is one host's turn, hosts go side by side."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from auditd.errors import BadInput
from auditd.records import Level
from auditd.schedule.efficiency import efficiency_factor
from auditd.schedule.incomplete_blocks import chosen_cells

MAX_RUNS = 1_000_000
N_SEED_WORDS = 4
"""Words of 32 bits in a seed: 128 bits, as in NumPy's own entropy."""
ORDER_STREAM, SEED_STREAM = 0, 1
"""Spawn keys of the streams that orders and seeds come from."""


@dataclass(frozen=True, kw_only=True)
class ScheduledRun:
    """One run to be made: `sequence` counts from 1 in the order of start, `seed` is 128 bits as text."""

    sequence: int
    block: str
    host: str | None
    cell: Mapping[str, Level]
    seed: str


@dataclass(frozen=True, kw_only=True)
class Schedule:
    """A run order.

    Attributes
    ----------
    entropy : the entropy of the one SeedSequence that everything follows from, as text.
    blocks : whether each block holds every cell.
    efficiency : the average efficiency factor of the blocks, 1 for complete ones.
    runs : in order of start.
    """

    entropy: str
    blocks: Literal["complete", "incomplete"]
    efficiency: float
    runs: tuple[ScheduledRun, ...]


def randomised_blocks(
    levels: Mapping[str, Sequence[Level]],
    hosts: Sequence[str] = (),
    replicates: int = 20,
    seed: int | None = None,
    *,
    block_size: int | None = None,
) -> Schedule:
    """Return a randomised block run order with a distinct seed for each run.

    Each host runs `replicates` blocks, one after the other. A complete block holds every cell once, in random
    order, so that cells are compared within a host and a short time, and a host's level, a drift or a step
    hits all of them alike. The blocks of the hosts are interleaved, in random order at each step.

    Parameters
    ----------
    levels : the levels of each factor; the cells are all their combinations.
    hosts : where runs are made, side by side; without hosts there is one block a replicate.
    replicates : blocks a host.
    seed : entropy of the SeedSequence; drawn from the system when None.
    block_size : runs a block may hold, where that is less than the number of cells: blocks are then
        incomplete, as evenly as they can be found, and `efficiency` says what that costs.

    Raises
    ------
    BadInput : no factor, repeated levels or hosts, a negative seed, too small blocks, too many runs, or
        incomplete blocks in which some cell would never run.

    Assumptions
    -----------
    Runs of a block meet like circumstances. Where a fault changes within blocks, comparisons lose precision
    but stay unbiased over the randomisation; where blocks are incomplete, part of the information is between
    hosts and is lost.

    References
    ----------
    Cochran & Cox (1957), Experimental Designs, 2nd edition, chapters 4 and 9; NumPy's documentation of
    SeedSequence on independent streams by spawning.
    """
    cells = cells_of(levels)
    _check_scheduled(levels, hosts, replicates, seed, len(cells))
    size = len(cells) if block_size is None else min(block_size, len(cells))
    if size < min(2, len(cells)):
        raise BadInput(f"block_size is {block_size}; a block compares cells only if it holds at least 2")
    root = np.random.SeedSequence(seed)
    entropy = root.entropy
    rng = np.random.default_rng(np.random.SeedSequence(entropy, spawn_key=(ORDER_STREAM,)))
    places: Sequence[str | None] = hosts or (None,)
    blocks = chosen_cells(len(cells), size, len(places) * replicates, rng)
    efficiency = 1.0 if size == len(cells) else efficiency_factor(blocks, len(cells))
    if efficiency == 0.0:
        raise BadInput("some cells share no block with the others; add replicates, or let blocks be larger")
    order = _interleaved(blocks, len(places), rng)
    seeds = distinct_seeds(len(order), np.random.SeedSequence(entropy, spawn_key=(SEED_STREAM,)))
    runs = tuple(
        ScheduledRun(
            sequence=number,
            block=f"{places[place]}/{replicate + 1}" if hosts else str(replicate + 1),
            host=places[place],
            cell=cells[cell],
            seed=own,
        )
        for number, ((place, replicate, cell), own) in enumerate(zip(order, seeds, strict=True), start=1)
    )
    kind: Literal["complete", "incomplete"] = "complete" if size == len(cells) else "incomplete"
    return Schedule(entropy=str(entropy), blocks=kind, efficiency=efficiency, runs=runs)


def cells_of(levels: Mapping[str, Sequence[Level]]) -> tuple[dict[str, Level], ...]:
    """Return all combinations of the factors' levels, the last factor fastest."""
    names = tuple(levels)
    return tuple(
        dict(zip(names, combination, strict=True)) for combination in itertools.product(*levels.values())
    )


def distinct_seeds(n: int, sequence: np.random.SeedSequence) -> tuple[str, ...]:
    """Return `n` distinct seeds of 128 bits, as text: the states of the sequence's children.

    Two of 128 bits agree with a chance of n² / 2¹²⁹; should they, further children take their place.
    """
    seeds: dict[str, None] = {}
    while len(seeds) < n:
        for child in sequence.spawn(n - len(seeds)):
            words = child.generate_state(N_SEED_WORDS, np.uint32).tolist()
            seeds[str(sum(word << (32 * place) for place, word in enumerate(words)))] = None
    return tuple(seeds)


def _interleaved(
    blocks: Sequence[Sequence[int]], n_places: int, rng: np.random.Generator
) -> list[tuple[int, int, int]]:
    """Put blocks into time as (place, replicate, cell): in each step every place makes its next run."""
    order = []
    for replicate in range(len(blocks) // n_places):
        own = [rng.permutation(blocks[replicate * n_places + place]) for place in range(n_places)]
        for step in range(len(own[0])):
            order += [(int(place), replicate, int(own[place][step])) for place in rng.permutation(n_places)]
    return order


def _check_scheduled(
    levels: Mapping[str, Sequence[Level]],
    hosts: Sequence[str],
    replicates: int,
    seed: int | None,
    n_cells: int,
) -> None:
    if not levels:
        raise BadInput("no factor to schedule; state schedule.levels")
    for name, own in levels.items():
        kinds = [(isinstance(level, bool), level) for level in own]
        if not own or len(set(kinds)) != len(kinds):
            raise BadInput(f"levels of {name} must be distinct, at least one; got {list(own)!r}")
    if len(set(hosts)) != len(hosts):
        raise BadInput(f"hosts must be distinct; got {list(hosts)!r}")
    if replicates < 1:
        raise BadInput(f"replicates is {replicates}; at least 1 is expected")
    if seed is not None and seed < 0:
        raise BadInput(f"seed is {seed}; a whole number from 0 is expected")
    n_runs = n_cells * max(1, len(hosts)) * replicates
    if n_runs > MAX_RUNS:
        raise BadInput(f"the schedule has {n_runs} runs; at most {MAX_RUNS} are made at once")
