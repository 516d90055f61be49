"""Seed blocks: the same seed in both sides, compared by differences within blocks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.crossing import MAX_LEVELS, NuisanceCrossing
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
    """Difference of the sides within every block with all compared cells; None with too few of those."""
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
    return Pairs(difference=difference[order], last=last[complete][order], n_runs=int(count[complete].sum()))


def constant_within(crossing: NuisanceCrossing, blocks: Codes) -> bool:
    """Whether every block ran on one level of the nuisance."""
    low = np.full(blocks.n_levels, crossing.codes.n_levels, dtype=np.int64)
    high = np.full(blocks.n_levels, -1, dtype=np.int64)
    np.minimum.at(low, blocks.codes, crossing.codes.codes)
    np.maximum.at(high, blocks.codes, crossing.codes.codes)
    return bool((low == high).all())


def level_adjusted(y: Floats, cells: Codes, blocks: Codes, crossing: NuisanceCrossing) -> Floats:
    """Take off level effects of a nuisance that differs within blocks, estimated within blocks and cells."""
    n_levels = crossing.codes.n_levels
    if n_levels > MAX_LEVELS:
        return y
    width = cells.n_levels + n_levels
    size = np.bincount(blocks.codes).astype(float)
    counts = np.hstack(
        [
            np.bincount(
                blocks.codes * codes.n_levels + codes.codes, minlength=blocks.n_levels * codes.n_levels
            ).reshape(blocks.n_levels, codes.n_levels)
            for codes in (cells, crossing.codes)
        ]
    )
    met = np.bincount(cells.codes * n_levels + crossing.codes.codes, minlength=cells.n_levels * n_levels)
    joint = met.reshape(cells.n_levels, n_levels)
    gram = np.block([[np.diag(joint.sum(1)), joint], [joint.T, np.diag(joint.sum(0))]]).astype(float)
    gram -= (counts.T / size) @ counts
    centred = y - (np.bincount(blocks.codes, y) / size)[blocks.codes]
    right = np.concatenate([np.bincount(c.codes, centred, c.n_levels) for c in (cells, crossing.codes)])
    effect = np.linalg.lstsq(gram, right, rcond=1e-10)[0][width - n_levels :]
    return np.asarray(y - effect[crossing.codes.codes])
