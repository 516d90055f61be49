"""Which runs gave one and the same result: equal to the last digit in every response, and not by chance."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from auditd.checks.facts.resolution import MAX_CHANCE, Resolution
from auditd.plan import AUTO_RESPONSES
from auditd.series.table import Floats, Ints, RunTable

N_LEARNT = 4096
"""Distinct results from which the responses' resolution is estimated."""


def duplicate_groups(table: RunTable) -> Ints:
    """Return a group for each run, shape (n,); completed runs of one group have equal results.

    Only results whose chance equality in the campaign, over all pairs, is less likely than 1e-6 count as
    equal; others, and runs without finite results, are groups of their own.
    """
    groups = np.arange(table.n)
    names = [name for name in table.responses if name not in AUTO_RESPONSES]
    if not names or table.n == 0:
        return groups
    rows = np.column_stack([table.responses[name] for name in names])
    known = np.flatnonzero(np.isfinite(rows).all(axis=1) & table.completed)
    if len(known) < 2:
        return groups
    _, first, inverse, counts = np.unique(
        rows[known], axis=0, return_index=True, return_inverse=True, return_counts=True
    )
    repeated = np.flatnonzero(counts > 1)
    if len(repeated) == 0:
        return groups
    certain = _beyond_chance(rows[known], table.cells.codes[known], first, repeated)
    of_run = inverse.ravel()
    same = certain[of_run]
    groups[known[same]] = known[first[of_run[same]]]
    return groups


def _beyond_chance(rows: Floats, cells: Ints, first: Ints, repeated: Ints) -> NDArray[np.bool_]:
    """Return for each distinct result whether its equality cannot be chance, shape (distinct,)."""
    resolution = Resolution(rows.shape[1])
    for at in np.sort(first)[:N_LEARNT].tolist():
        resolution.take(int(cells[at]), tuple(rows[at].tolist()))
    n_pairs = len(rows) * (len(rows) - 1) / 2
    certain = np.zeros(len(first), dtype=bool)
    for number in repeated.tolist():
        chance = resolution.chance(tuple(rows[first[number]].tolist()))
        certain[number] = chance * n_pairs < MAX_CHANCE
    return certain
