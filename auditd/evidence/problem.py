"""A comparison as a linear model: cells, nuisance levels, and each level's own difference of the sides."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.chains import Chains
from auditd.evidence.crossing import NuisanceCrossing
from auditd.evidence.inputs import Floats, Ints
from auditd.evidence.moments import Moments, sum_moments

MAX_CELLS = 60  # cells that get a column each; with more, runs are centred within their cells first


@dataclass(frozen=True, kw_only=True)
class Problem:
    """Runs and columns of one comparison.

    y : (n,) centred and scaled. cell : (n,) code. contrast : (n_cells,) weights. side : (n,) −½ for a, +½
        for b, 0 for other cells.
    crossings : nuisances with columns. n_cells_spent : degrees of freedom that cells cost (more than
        n_cells after centring).
    at_zero : prior probability of no autocorrelation. ordered : whether the runs' order is known.
    """

    y: Floats
    cell: Ints
    contrast: Floats
    side: Floats
    crossings: tuple[NuisanceCrossing, ...]
    n_cells_spent: int
    at_zero: float = 0.0
    ordered: bool = True


@dataclass(frozen=True, kw_only=True)
class Columns:
    """The design by code: table (K, k), each run's code, and what the columns are, by crossing index.

    slopes : each level's own difference, as drawn from many. own : the same of a nuisance with too few levels
        to be a sample, about their mean as weighted by the runs: it is this mean that a claim about these
        levels is for, whether own differences stand in the model or not.
    """

    code: Ints
    table: Floats
    cells: Ints
    levels: dict[int, Ints]
    slopes: dict[int, Ints]
    own: dict[int, Ints]

    def base(self) -> Ints:
        """Columns of cells and nuisance levels, without the slopes."""
        return np.concatenate([self.cells, *self.levels.values()])


def lay_columns(problem: Problem) -> Columns:
    """Gather runs with equal labels under one code, and lay out the design's row for each code."""
    key = problem.cell.copy()
    for crossing in problem.crossings:
        key = np.unique(key * crossing.codes.n_levels + crossing.codes.codes, return_inverse=True)[1]
    _, first, code = np.unique(key, return_index=True, return_inverse=True)
    cell, side = problem.cell[first], problem.side[first]
    n_cells = len(problem.contrast)
    parts = [(cell[:, None] == np.arange(n_cells)).astype(float)]
    levels: dict[int, Ints] = {}
    slopes: dict[int, Ints] = {}
    own: dict[int, Ints] = {}
    width = n_cells
    for place, crossing in enumerate(problem.crossings):
        level = crossing.codes.codes[first]
        if crossing.kind in {"block", "random"}:
            parts.append((level[:, None] == np.arange(crossing.codes.n_levels)).astype(float))
            levels[place] = np.arange(width, width + crossing.codes.n_levels)
            width += crossing.codes.n_levels
        if len(crossing.both) > 1:
            differences = (level[:, None] == crossing.both) * side[:, None]
            if crossing.is_few:
                differences = _about_mean(differences, _pull(problem, crossing))
            parts.append(differences)
            found = own if crossing.is_few else slopes
            found[place] = np.arange(width, width + differences.shape[1])
            width += differences.shape[1]
    return Columns(
        code=code, table=np.hstack(parts), cells=np.arange(n_cells), levels=levels, slopes=slopes, own=own
    )


def _pull(problem: Problem, crossing: NuisanceCrossing) -> Floats:
    """Weight of each level's own difference in an additive fit, the sum of them 1."""
    a, b = (
        np.bincount(crossing.codes.codes[side], minlength=crossing.codes.n_levels)[crossing.both]
        for side in (problem.side < 0, problem.side > 0)
    )
    pull = a * b / (a + b) if (a * b > 0).all() else (a + b).astype(float)
    return np.asarray(pull / pull.sum())


def _about_mean(differences: Floats, pull: Floats) -> Floats:
    """Columns (K, L − 1) for own differences of L levels whose weighted mean is 0."""
    return np.asarray(differences[:, :-1] - differences[:, -1:] * (pull[:-1] / pull[-1]))


def collect(problem: Problem, columns: Columns, chains: Chains) -> Moments:
    """The sums of this comparison along the given chains."""
    return sum_moments(problem.y, columns.code, columns.table, chains)
