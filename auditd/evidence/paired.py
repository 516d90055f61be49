"""Seed blocks: the same seed in both sides, compared by differences within blocks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Codes, Floats, Ints

MIN_BLOCKS = 4  # complete blocks that a paired comparison needs


@dataclass(frozen=True, kw_only=True)
class Pairs:
    """One difference b − a for each complete block, in the order in which blocks were completed.

    difference : (B,). last : (B,) run that completed each block. n_runs : runs used.
    """

    difference: Floats
    last: Ints
    n_runs: int


def pair(y: Floats, cells: Codes, blocks: Codes, weights: Floats) -> Pairs | None:
    """Difference of the sides within every block that holds all compared cells; None with too few of those."""
    compared = np.flatnonzero(weights)
    place = np.full(cells.n_levels, -1, dtype=np.int64)
    place[compared] = np.arange(len(compared))
    used = np.flatnonzero(place[cells.codes] >= 0)
    slot = blocks.codes[used] * len(compared) + place[cells.codes[used]]
    size = blocks.n_levels * len(compared)
    count = np.bincount(slot, minlength=size).reshape(blocks.n_levels, len(compared))
    total = np.bincount(slot, y[used], size).reshape(blocks.n_levels, len(compared))
    complete = np.flatnonzero((count > 0).all(axis=1))
    if len(complete) < MIN_BLOCKS:
        return None
    difference = (total[complete] / count[complete]) @ weights[compared]
    last = np.zeros(blocks.n_levels, dtype=np.int64)
    last[blocks.codes[used]] = used  # the last assignment stands
    order = np.argsort(last[complete], kind="stable")
    return Pairs(
        difference=difference[order], last=last[complete][order], n_runs=int(count[complete].sum())
    )
