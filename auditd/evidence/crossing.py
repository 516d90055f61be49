"""How a nuisance meets the compared cells: crossed, partly crossed, or not separable from them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from auditd.evidence.inputs import Codes, Floats, Ints

MAX_LEVELS = 40  # levels that enter the design one column each; above, levels are clusters
MIN_SAMPLE_LEVELS = 3
"""Levels that can stand for others. Measured with a host × cell variance of 0.1, in tests/calibration/tables:
three hosts as a sample cover 0.93-0.94 at 1.5 known widths (as a block, 0.55-0.70); two would make
the interval three to five times the naive one, with one degree of freedom to tell it by."""


@dataclass(frozen=True, kw_only=True)
class NuisanceCrossing:
    """One nuisance against the cells.

    kind : "block" (each compared cell meets each level), "random" (partly crossed), "cluster" (as random,
        many levels), "unit" (one run a level), "aliased" (not separable; `reason` says why). both : levels
        that ran both sides.
    """

    name: str
    codes: Codes
    kind: Literal["block", "random", "cluster", "unit", "aliased"]
    both: Ints
    reason: str | None = None

    @property
    def is_few(self) -> bool:
        """Whether its levels are too few to be a sample of others: the claim is then for these alone."""
        return self.codes.n_levels < MIN_SAMPLE_LEVELS


def cross(name: str, codes: Codes, cells: Codes, weights: Floats) -> NuisanceCrossing:
    """Classify one nuisance by its table of counts against the cells."""
    n_levels, n_cells = codes.n_levels, cells.n_levels
    met = np.unique(cells.codes * n_levels + codes.codes)
    met_cell, met_level = met // n_levels, met % n_levels
    level_count = np.bincount(codes.codes)
    if level_count.max() == 1:
        return NuisanceCrossing(name=name, codes=codes, kind="unit", both=np.empty(0, np.int64))
    left = np.bincount(met_level[weights[met_cell] < 0], minlength=n_levels) > 0
    right = np.bincount(met_level[weights[met_cell] > 0], minlength=n_levels) > 0
    both = np.flatnonzero(left & right)
    component = _components(met_cell, met_level, n_cells, n_levels)
    unbalanced = np.abs(np.bincount(component, weights)) > 1e-9
    if unbalanced.any():
        return NuisanceCrossing(
            name=name, codes=codes, kind="aliased", both=both, reason=_alias_reason(name, codes, left, right)
        )
    compared_levels = left | right
    n_met = np.bincount(met_cell[compared_levels[met_level]], minlength=n_cells)[weights != 0]
    kind: Literal["block", "random", "cluster"]
    if n_levels > MAX_LEVELS:
        kind = "cluster"
    else:
        kind = "block" if (n_met == compared_levels.sum()).all() else "random"
    return NuisanceCrossing(name=name, codes=codes, kind=kind, both=both)


def _components(cell: Ints, level: Ints, n_cells: int, n_levels: int) -> Ints:
    """Component of each cell in the graph that joins a cell to every level it met."""
    label = np.arange(n_cells, dtype=np.int64)
    while True:
        lowest = np.full(n_levels, n_cells, dtype=np.int64)
        np.minimum.at(lowest, level, label[cell])
        new = label.copy()
        np.minimum.at(new, cell, lowest[level])
        if (new == label).all():
            return label
        label = new


def _alias_reason(name: str, codes: Codes, left: np.ndarray, right: np.ndarray) -> str:
    """Say in words why the two sides cannot be told from the nuisance."""
    sides = [_first_names(codes, np.flatnonzero(side)) for side in (left, right)]
    if not (left & right).any():
        return (
            f"not separable from {name}: every run of a has {name} {sides[0]}, every run of b {sides[1]}; "
            f"no {name} ran both"
        )
    return f"not separable from {name}: some compared cells share no {name} with their counterpart"


def _first_names(codes: Codes, index: Ints) -> str:
    """The first few levels by name."""
    names = [str(codes.levels[i]) for i in index[:3]]
    return ", ".join(names) + (f" and {len(index) - 3} more" if len(index) > 3 else "")
