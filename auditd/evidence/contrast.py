"""The honest comparison of two sides."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from auditd.errors import NotTestable
from auditd.evidence.clustered import by_cluster
from auditd.evidence.crossing import MAX_LEVELS, NuisanceCrossing, cross
from auditd.evidence.fit import build
from auditd.evidence.inputs import (
    CONSTANT,
    NO_ORDER,
    Codes,
    Floats,
    Labels,
    as_codes,
    as_confidence,
    as_nuisances,
    as_values,
    matched_sides,
    standardise,
)
from auditd.evidence.naive import welch
from auditd.evidence.paired import Pairs, constant_within, level_adjusted, pair
from auditd.evidence.problem import MAX_CELLS, Problem
from auditd.evidence.report import Scene, aliased, clustered, solved
from auditd.evidence.result import Contrast
from auditd.evidence.solution import solve

MIN_SIDE_RUNS = 2
NO_MEMORY = 0.55  # prior probability that differences of seed blocks do not depend on each other
MIN_RESIDUAL_DF = 3  # runs beyond the fitted columns


@dataclass(frozen=True, kw_only=True)
class ComparedRuns:
    """The checked arguments; y is centred and scaled."""

    y: Floats
    cells: Codes
    weights: Floats
    crossings: tuple[NuisanceCrossing, ...]
    ordered: bool


def contrast(
    values: object,
    *,
    cells: Labels,
    a: object,
    b: object,
    nuisance: Mapping[str, Labels] = {},
    blocks: Labels | None = None,
    confidence: float = 0.95,
    ordered: bool = True,
) -> Contrast:
    """Compare two sides, b − a, with an interval that is honest under the dependence found.

    Errors follow an AR(1) along the order or within a nuisance's levels (whichever shows more), fitted by
    restricted likelihood and averaged over its coefficient. A nuisance that each compared cell meets is a
    block; one that is partly crossed is a random effect; each level's own difference between the sides is
    the error of the comparison. Two levels are no sample of others: they enter as a block alone, and a
    remark says that the claim is for these. Levels beyond 40 are clusters. A nuisance that cannot be
    separated from the sides makes the comparison not estimable.

    Parameters
    ----------
    values : (n,) response of the runs in audit order, on the audited scale.
    cells : (n,) label of each run's cell.
    a, b : label or list of labels; lists of equal length are matched by place, each side's cells weigh
        equally.
    nuisance : name to (n,) labels.
    blocks : (n,) labels of seed blocks (common random numbers), or None. Complete blocks are compared by
        their differences.
    confidence : of every interval.
    ordered : whether the order of the runs is known; if not, no dependence in time is asked.

    Returns
    -------
    Contrast

    Raises
    ------
    BadInput : values not finite or not one-dimensional, labels not one a run, a and b share a cell.
    NotTestable : fewer than two runs a side, no runs beyond the fitted columns, or runs that do not vary.

    Notes
    -----
    Assumes: errors stationary about the cells' levels; with long memory or a drift confounded with the
    cells (all of A before B) intervals are too short, and so are they with ordered=False where errors
    depend in time. Three levels or more of a nuisance are taken as drawn from many; with 3 or 4 the interval
    is wide. With 2, an interval holds for their difference as the runs weigh it, not for other levels. No
    warning is not proof of independence.

    References
    ----------
    Harville (1977), JASA 72:320-338; Satterthwaite (1946), Biometrics Bulletin 2:110-114; Hartung & Knapp
    (2001), Statistics in Medicine 20:3875-3889; Robbins (1970), Annals of Mathematical Statistics
    41:1397-1409.
    """
    level = as_confidence(confidence)
    y = as_values(values)
    coded = as_codes(cells, len(y), "cells")
    nuisances = as_nuisances(nuisance, len(y))
    seeds = None if blocks is None else as_codes(blocks, len(y), "blocks")
    side_a, side_b, n_left_out = matched_sides(a, b, coded)
    weights = np.zeros(coded.n_levels)
    weights[side_a], weights[side_b] = -1 / len(side_a), 1 / len(side_b)
    scaled, scale = standardise(y)
    _require_runs(scaled, scale / max(float(np.abs(y).max()), 1e-300), coded, weights)
    crossings = tuple(cross(name, codes, coded, weights) for name, codes in nuisances.items())
    runs = ComparedRuns(y=scaled, cells=coded, weights=weights, crossings=crossings, ordered=ordered)
    return _compare(runs, seeds, _scene(runs, scale, level, n_left_out))


def _scene(runs: ComparedRuns, scale: float, level: float, n_left_out: int) -> Scene:
    """The naive result, counts and remarks that hold whatever is fitted."""
    remarks = [
        f"{c.name}: one run a level, so its effect cannot be told from the runs' own spread"
        for c in runs.crossings
        if c.kind == "unit"
    ]
    if n_left_out:
        remarks.append(f"{n_left_out} listed cells have no runs, or no partner with runs, and are left out")
    if not runs.ordered:
        remarks.append(NO_ORDER)
    sides = _side_counts(runs.cells, runs.weights)
    return Scene(
        naive=welch(runs.y, runs.cells.codes, runs.weights, level),
        scale=scale,
        n=sum(sides),
        confidence=level,
        sides=sides,
        remarks=tuple(remarks),
    )


def _compare(runs: ComparedRuns, seeds: Codes | None, scene: Scene) -> Contrast:
    """Choose the way: not estimable, paired, clustered, or by columns."""
    reasons = [c.reason for c in runs.crossings if c.kind == "aliased" and c.reason]
    if reasons:
        return aliased(scene, "; ".join(reasons))
    problem = None if seeds is None else _paired_problem(runs, seeds)
    if problem is not None:
        method = f"differences within {len(problem.y)} seed blocks"
        return solved(solve(build(problem), scene.confidence), scene, method, ())
    many = [c for c in runs.crossings if c.kind == "cluster"]
    if many:
        widest = max(many, key=lambda c: c.codes.n_levels)
        found = by_cluster(runs.y, runs.cells.codes, widest.codes.codes, runs.weights)
        return clustered(found, scene, widest.name)
    problem = _problem(runs)
    model = build(problem)
    if model.moments.n - model.n_fixed < MIN_RESIDUAL_DF:
        raise NotTestable(
            f"{MIN_RESIDUAL_DF} runs beyond the cells and blocks", model.moments.n - model.n_fixed
        )
    return solved(
        solve(model, scene.confidence),
        scene,
        "generalised least squares" + (f" along {model.chains.along}" if runs.ordered else ""),
        problem.crossings,
    )


def _require_runs(y: Floats, relative: float, cells: Codes, weights: Floats) -> None:
    """Refuse a side with one run, and runs that do not vary; `relative` is their spread ÷ size."""
    counts = np.bincount(cells.codes, minlength=cells.n_levels)
    for name, side in (("a", weights < 0), ("b", weights > 0)):
        if counts[side].sum() < MIN_SIDE_RUNS:
            raise NotTestable(f"{MIN_SIDE_RUNS} runs on side {name}", int(counts[side].sum()))
    if len(y) - cells.n_levels < MIN_RESIDUAL_DF:
        raise NotTestable(f"{MIN_RESIDUAL_DF} runs beyond one a cell", len(y) - cells.n_levels)
    mean = np.bincount(cells.codes, y) / counts
    residual = (y - mean[cells.codes])[weights[cells.codes] != 0]
    if float(np.abs(residual).max()) <= CONSTANT * max(1.0, 1 / max(relative, CONSTANT)):
        raise NotTestable("runs that vary within their cells", "constant values in every compared cell")


def _side_counts(cells: Codes, weights: Floats) -> tuple[int, int]:
    counts = np.bincount(cells.codes, minlength=cells.n_levels)
    return int(counts[weights < 0].sum()), int(counts[weights > 0].sum())


def _problem(runs: ComparedRuns) -> Problem:
    """The linear model; with very many cells, runs are centred within cells and each side is one cell."""
    weights, code, y = runs.weights, runs.cells.codes, runs.y
    side = np.sign(weights[code]) / 2
    crossings = tuple(c for c in runs.crossings if c.kind in {"block", "random"})
    if len(weights) > MAX_CELLS:
        count = np.bincount(code)
        mean = np.bincount(code, y) / count
        levels = np.array(
            [-(weights[weights < 0] @ mean[weights < 0]), 0.0, weights[weights > 0] @ mean[weights > 0]]
        )
        group = (np.sign(weights) + 1).astype(np.int64)[code]
        y = y - mean[code] + levels[group]
        present, code = np.unique(group, return_inverse=True)
        weights = np.array([-1.0, 0.0, 1.0])[present]
    return Problem(
        y=y,
        cell=code,
        contrast=weights,
        side=side,
        crossings=crossings,
        n_cells_spent=runs.cells.n_levels,
        ordered=runs.ordered,
    )


def _paired_problem(runs: ComparedRuns, blocks: Codes) -> Problem | None:
    """Differences of blocks as one cell, about their common mean; None with too few complete blocks.

    A nuisance that is one throughout each block may have a difference of its own at each level; the effects
    of one that varies within blocks are taken off.
    """
    y, kept = runs.y, []
    for crossing in runs.crossings:
        if crossing.kind == "unit":
            continue
        if constant_within(crossing, blocks):
            kept.append(crossing)
        else:
            y = level_adjusted(y, runs.cells, blocks, crossing)
    pairs = pair(y, runs.cells, blocks, runs.weights)
    if pairs is None:
        return None
    n = len(pairs.difference)
    return Problem(
        y=pairs.difference,
        cell=np.zeros(n, dtype=np.int64),
        contrast=np.ones(1),
        side=np.full(n, 0.5),
        crossings=tuple(
            _at_pairs(crossing, pairs) for crossing in kept if crossing.codes.n_levels <= MAX_LEVELS
        ),
        n_cells_spent=1,
        at_zero=NO_MEMORY,
        ordered=runs.ordered,
    )


def _at_pairs(crossing: NuisanceCrossing, pairs: Pairs) -> NuisanceCrossing:
    """The nuisance by block: its levels cancel and have no column, each level's own difference has one."""
    present, code = np.unique(crossing.codes.codes[pairs.last], return_inverse=True)
    codes = Codes(codes=code, levels=tuple(crossing.codes.levels[i] for i in present))
    return replace(crossing, codes=codes, kind="cluster", both=np.arange(len(present)))
