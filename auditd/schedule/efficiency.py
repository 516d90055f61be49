"""The efficiency factor of a block design."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput

ZERO_ROOT = 1e-9
"""Roots of the scaled information matrix below this are zero: the design is then not connected."""


def efficiency_factor(blocks: Sequence[Sequence[int]], n_treatments: int) -> float:
    """Return the average efficiency factor of a block design, between 0 and 1.

    The harmonic mean of the canonical efficiency factors, which are the non-zero roots of the information
    matrix R − N K⁻¹ Nᵀ scaled by the replications on both sides. With equal replication it is the ratio of
    the average variance of a difference between two treatments in complete blocks to that in this design, at
    the same error variance. 1 for complete blocks, 0 for a design in which some difference cannot be
    estimated within blocks.

    Parameters
    ----------
    blocks : the treatments of each block, as numbers from 0; blocks may differ in size.
    n_treatments : the number of treatments.

    Raises
    ------
    BadInput : no blocks, a number outside the range, or a treatment that never occurs.

    References
    ----------
    Kempthorne (1956), Annals of Mathematical Statistics 27, 846–849. James & Wilkinson (1971), Biometrika 58,
    279–294. John & Williams (1995), Cyclic and Computer Generated Designs, 2nd edition, chapter 2.
    """
    counts = _incidence(blocks, n_treatments)
    if n_treatments == 1:
        return 1.0
    replications, sizes = counts.sum(axis=1), counts.sum(axis=0)
    scaled = counts / np.sqrt(np.outer(replications, sizes))
    roots = np.linalg.eigvalsh(np.eye(n_treatments) - scaled @ scaled.T)
    canonical = roots[1:]  # the smallest belongs to the mean and is zero
    if canonical[0] < ZERO_ROOT:
        return 0.0
    return float(min(1.0, (n_treatments - 1) / np.sum(1.0 / canonical)))


def _incidence(blocks: Sequence[Sequence[int]], n_treatments: int) -> NDArray[np.float64]:
    """Return how often each treatment occurs in each block, shape (treatments, blocks)."""
    if n_treatments < 1 or not blocks or any(not block for block in blocks):
        raise BadInput("a design needs treatments and blocks, and each block at least one run")
    counts = np.zeros((n_treatments, len(blocks)))
    for number, block in enumerate(blocks):
        for treatment in block:
            if not 0 <= treatment < n_treatments:
                raise BadInput(
                    f"block {number} names treatment {treatment}; 0 to {n_treatments - 1} are known"
                )
            counts[treatment, number] += 1
    absent = np.flatnonzero(counts.sum(axis=1) == 0)
    if absent.size:
        raise BadInput(f"treatment {int(absent[0])} occurs in no block; leave it out or schedule it")
    return counts
