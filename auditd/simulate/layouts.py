"""Layouts of cells over hosts and time: randomised blocks, one cell after the other, a sweep."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from auditd.errors import BadInput
from auditd.simulate.simulated import Labels, Layout

RUN_S = 600.0
"""Length of a simulated run, in seconds."""
CAMPAIGN_START = 1_767_225_600.0
"""2026-01-01T00:00:00Z in POSIX seconds; any date would do."""


def blocked_layout(
    rng: np.random.Generator,
    *,
    cells: Sequence[str],
    hosts: Sequence[str],
    replicates: int,
    run_s: float = RUN_S,
) -> Layout:
    """Randomised complete blocks: each host runs every cell once a replicate, in random order.

    Hosts run side by side.

    Parameters
    ----------
    rng : the generator that the orders come from.
    cells, hosts : labels.
    replicates : blocks a host.
    run_s : length of a run, in seconds.
    """
    _check_labels(cells, hosts, replicates)
    k, h = len(cells), len(hosts)
    orders = rng.permuted(np.broadcast_to(np.arange(k), (replicates, h, k)), axis=2)
    # in time: position within the block, hosts interleaved in a random order at each moment
    in_time = rng.permuted(
        (orders + k * np.arange(h)[None, :, None]).transpose(0, 2, 1).reshape(replicates * k, h), axis=1
    ).ravel()
    return _evenly_timed(np.asarray(cells)[in_time % k], np.asarray(hosts)[in_time // k], h, run_s)


def sequential_layout(
    rng: np.random.Generator,
    *,
    cells: Sequence[str],
    hosts: Sequence[str],
    replicates: int,
    run_s: float = RUN_S,
) -> Layout:
    """Every run of the first cell before every run of the next; hosts balanced and in random order."""
    _check_labels(cells, hosts, replicates)
    order = np.repeat(np.asarray(cells), len(hosts) * replicates)
    ran_on = np.concatenate([rng.permutation(np.tile(np.asarray(hosts), replicates)) for _ in cells])
    return _evenly_timed(order, ran_on, len(hosts), run_s)


def sweep_layout(
    *, cells: Sequence[str], hosts: Sequence[str], replicates: int, run_s: float = RUN_S
) -> Layout:
    """The cells in their given order, again and again, hosts in turn; nothing is random."""
    _check_labels(cells, hosts, replicates)
    k, h = len(cells), len(hosts)
    number = np.arange(k * h * replicates)
    ran_on = np.asarray(hosts)[(number + number // math.lcm(k, h)) % h]  # else a host would meet few cells
    return _evenly_timed(np.asarray(cells)[number % k], ran_on, h, run_s)


def _evenly_timed(cells: Labels, hosts: Labels, n_hosts: int, run_s: float) -> Layout:
    """Give starts such that `n_hosts` runs go on at a time."""
    times = CAMPAIGN_START + np.arange(cells.shape[0], dtype=np.float64) * (run_s / n_hosts)
    return Layout(cells=cells, nuisance={"host": hosts}, times=times)


def _check_labels(cells: Sequence[str], hosts: Sequence[str], replicates: int) -> None:
    for name, labels in (("cells", cells), ("hosts", hosts)):
        if not labels or len(set(labels)) != len(labels):
            raise BadInput(f"{name} must be distinct labels, at least one; got {list(labels)!r}")
    if replicates < 1:
        raise BadInput(f"replicates is {replicates}; at least 1 is expected")
