"""How many independent runs the cells' means are worth."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from auditd.errors import NotTestable
from auditd.evidence.chains import Chains
from auditd.evidence.distinct import as_parents, lineage, originals
from auditd.evidence.inputs import (
    CONSTANT,
    NO_ORDER,
    Codes,
    Floats,
    Ints,
    Labels,
    as_codes,
    as_nuisances,
    as_values,
    standardise,
)
from auditd.evidence.levels import LevelEffects
from auditd.evidence.memory import TimeDependence, forget, remember
from auditd.evidence.moments import sum_moments
from auditd.evidence.persistence import lags_needed, same_cell_pairs
from auditd.evidence.posterior import Posterior, explore
from auditd.evidence.restricted import Fits, evaluate
from auditd.evidence.result import EffectiveNumber
from auditd.evidence.spread import in_own_spread
from auditd.evidence.suspects import suspect
from auditd.evidence.tally import (
    TAIL,
    JudgedEffect,
    Ledger,
    Lineage,
    concentration,
    dependence_of,
    draws,
    total,
    units,
)

MIN_RESIDUAL_DF = 3
MAX_CELLS = 60  # cells whose means are columns of the lineage's likelihood
ROUNDING = 1e-12  # relative error of sums over cells
AFTER_LINEAGE = (
    0.0005  # tail in place of 0.025 once lineage explains the order: its innovations are estimated
)


@dataclass(frozen=True, kw_only=True)
class DistinctRuns:
    """Distinct runs: residuals about the cells' means on a scale of 1, codes, and lineage links."""

    residual: Floats
    cell: Ints
    count: Floats
    nuisances: dict[str, Codes]
    links: Chains | None


def effective_number(
    values: object,
    *,
    cells: Labels,
    nuisance: Mapping[str, Labels] = {},
    duplicates: object = None,
    parents: object = None,
    ordered: bool = True,
) -> EffectiveNumber:
    """Count the independent runs that would give the cells' means as exactly as these runs do.

    Causes are taken in the order duplicates, lineage, batch, serial, each on what the earlier left.
    Duplicates count as distinct runs. A restart chain is an AR(1) from parent to child. A batch effect is a
    variance between the levels of a nuisance within cells. Along time, steps of a level are taken out first
    and count as levels that could have been others; the rest is an AR(1) along the order or within a
    nuisance's levels.

    A cause whose 95 % interval includes "no loss" has the factor 1, so that independent runs lose nothing
    by chance in 19 of 20 campaigns a cause; what it may cost all the same is in `loss_high`.

    Parameters
    ----------
    values : (n,) response of the runs in audit order.
    cells : (n,) label of each run's cell.
    nuisance : name to (n,) labels.
    duplicates : (n,) booleans (a copy of an earlier run), indices of the run copied or −1, or labels shared
        by copies; or None.
    parents : (n,) index of the run each was restarted from, −1 for none; or None.
    ordered : whether the order of the runs is known; if not, no dependence in time is counted.

    Returns
    -------
    EffectiveNumber

    Raises
    ------
    BadInput : malformed arguments, or a lineage with a cycle.
    NotTestable : fewer than 3 runs beyond one a cell, or runs that do not vary within cells.

    Notes
    -----
    Residuals are pooled in their cells' own standard deviations, so that a few wide cells do not decide for
    all; cells of fewer than 5 runs share one.

    Assumes: level effects drawn from one distribution, errors stationary between steps. A slow wander is
    partly taken for steps; long memory beyond an AR(1) makes the number too large. A dependence that is the
    same in every run cannot be seen.

    References
    ----------
    Kish (1965), Survey Sampling, section 8.2 (design effect); Searle (1971), Linear Models, chapters 9-10;
    Bayley & Hammersley (1946), Supplement to JRSS 8:184-197 (effective number under autocorrelation).
    """
    y = as_values(values)
    n = len(y)
    coded = as_codes(cells, n, "cells")
    nuisances = as_nuisances(nuisance, n)
    original = originals(duplicates, n)
    links = None if parents is None else as_parents(parents, n)
    kept = np.flatnonzero(original == np.arange(n))
    chains = None if links is None else lineage(links, original, kept)
    runs, remarks = _prepare(
        y[kept], coded.codes[kept], {k: _some(v, kept) for k, v in nuisances.items()}, chains
    )
    return _count(runs, n, remarks if ordered else [*remarks, NO_ORDER], ordered=ordered)


def _some(codes: Codes, kept: Ints) -> Codes:
    present, code = np.unique(codes.codes[kept], return_inverse=True)
    return Codes(codes=code, levels=tuple(codes.levels[i] for i in present))


def _prepare(
    y: Floats, cell: Ints, nuisances: dict[str, Codes], links: Chains | None
) -> tuple[DistinctRuns, list[str]]:
    """Residuals about the cells' means, and the nuisances that can be asked."""
    _, cell = np.unique(cell, return_inverse=True)
    count = np.bincount(cell).astype(float)
    if len(y) - len(count) < MIN_RESIDUAL_DF:
        raise NotTestable(f"{MIN_RESIDUAL_DF} distinct runs beyond one a cell", len(y) - len(count))
    scaled, size = standardise(y)
    residual = scaled - (np.bincount(cell, scaled) / count)[cell]
    spread = float(residual @ residual / (len(y) - len(count))) ** 0.5
    if size * spread <= CONSTANT * float(np.abs(y).max()) or spread <= CONSTANT:
        raise NotTestable("runs that vary within their cells", "constant values in every cell")
    remarks = [
        f"{name}: one run a level, so its effect cannot be told from the runs' own spread"
        for name, codes in nuisances.items()
        if codes.n_levels == len(y)
    ]
    asked = {name: codes for name, codes in nuisances.items() if 1 < codes.n_levels < len(y)}
    return DistinctRuns(
        residual=in_own_spread(residual / spread, cell, count),
        cell=cell,
        count=count,
        nuisances=asked,
        links=links,
    ), remarks


def _restart_chains(runs: DistinctRuns) -> Lineage | None:
    """Fit the coefficient from parent to child, and count chains and continuations by cell."""
    links = runs.links
    if links is None:
        return None
    n_cells = len(runs.count)
    few = n_cells <= MAX_CELLS
    code = runs.cell if few else np.zeros_like(runs.cell)
    k = n_cells if few else 1
    moments = sum_moments(runs.residual, code, np.eye(k), links)
    c = np.ones(k)

    def fit(rho: Floats, _share: Floats) -> Fits:
        return evaluate(moments, c, rho, np.zeros((len(rho), k)), n_cells)

    same = runs.cell[links.child] == runs.cell[links.parent]
    continued = np.bincount(runs.cell[links.child[same]], minlength=n_cells).astype(float)
    return Lineage(
        begun=runs.count - continued, continued=continued, posterior=explore(fit, with_share=False)
    )


def _count(runs: DistinctRuns, n: int, remarks: list[str], *, ordered: bool) -> EffectiveNumber:
    """Put the parts together."""
    family = _restart_chains(runs)
    inherited = _sign(family.posterior) > 0 if family else False
    rho = family.posterior.quantile(family.posterior.phi, 0.5) if family and inherited else 0.0
    residual = (
        runs.links.innovations(runs.residual, rho) if runs.links is not None and inherited else runs.residual
    )
    levels = suspect(residual, runs.cell, len(runs.count), runs.nuisances)
    if ordered:
        memory = remember(levels.rest, levels.level, levels.n_spent, runs.nuisances)
    else:
        memory = forget(levels.rest, levels.n_spent)
    n_cells, chains = len(runs.count), memory.chains
    phi = memory.posterior.quantile(memory.posterior.phi, 0.5)
    reach = phi if memory.higher is None else 1.0
    pairs = same_cell_pairs(runs.cell, n_cells, chains, lags_needed(reach, int(chains.mean_runs) + 1))
    stepped, weight = concentration(runs.cell, n_cells, memory.steps.segment)
    bare = Ledger(
        count=runs.count,
        lineage=family,
        effects=(),
        memory=memory,
        pairs=pairs,
        stepped=stepped,
        segment_weight=weight,
    )
    tail = AFTER_LINEAGE if inherited else TAIL
    sure = phi if _sign(memory.posterior, tail) else 0.0
    cell_inflation = bare.persistence(np.array([sure]))[0]
    judged = tuple(
        _with_dependence(e, dependence_of(e, memory, cell_inflation, sure, runs.cell)) for e in levels.found
    )
    return _result(replace(bare, effects=judged), n, rho, tail, (*remarks, *levels.remarks))


def _with_dependence(level_effects: LevelEffects, dependence: float) -> JudgedEffect:
    return JudgedEffect(
        effects=level_effects, dependence=dependence, found=level_effects.pvalue(dependence) < TAIL
    )


def _sign(posterior: Posterior, tail: float = TAIL) -> int:
    """1 or −1 where the interval of a coefficient excludes 0, else 0."""
    if posterior.quantile(posterior.phi, tail) > 0:
        return 1
    return -1 if posterior.quantile(posterior.phi, 1 - tail) < 0 else 0


def _result(ledger: Ledger, n: int, rho: float, tail: float, remarks: tuple[str, ...]) -> EffectiveNumber:
    """Factors of the causes one after the other, and the interval of all together."""
    memory, one = ledger.memory, np.ones(1)
    posterior = memory.posterior
    dependent = _sign(posterior, tail) != 0 or memory.higher is not None
    phi = posterior.phi if dependent else np.zeros(1)
    mass = posterior.weight if dependent else one
    left = units(ledger, np.array([rho]))
    batch = [one * (e.effects.variance(e.dependence) if e.found else 0.0) for e in ledger.effects]
    step = one * memory.steps.variance
    calm = np.ones((1, len(ledger.count)))
    n_distinct = float(ledger.count.sum())
    n_lineage = float(left.sum())
    n_batch = float(total(ledger, left, batch, step, calm, serial=False)[0])
    n_serial = float(mass @ total(ledger, left, batch, step, ledger.persistence(phi), serial=True))
    spread = np.quantile(1 - draws(ledger) / n, (TAIL, 1 - TAIL))
    loss = 1 - n_serial / n
    return EffectiveNumber(
        n=n,
        n_effective=n_serial,
        loss=loss,
        loss_low=min(float(spread[0]), loss),
        loss_high=max(float(spread[1]), loss),
        parts={
            "duplicates": _factor(n_distinct, n),
            "lineage": _factor(n_lineage, n_distinct),
            "batch": _factor(n_batch, n_lineage),
            "serial": _factor(n_serial, n_batch),
        },
        detail=_detail(ledger),
        remarks=(*remarks, *_in_time(memory, dependent=dependent)),
    )


def _in_time(memory: TimeDependence, *, dependent: bool) -> tuple[str, ...]:
    """What was found along time, in words."""
    said = []
    if memory.steps.df:
        said.append(f"steps of the level along {memory.steps.along}, taken out first: {memory.steps.df}")
    if dependent:
        said.append(f"dependence in time: along {memory.chains.along}")
    return tuple(said)


def _factor(after: float, before: float) -> float:
    """What a cause leaves; exactly 1 where it takes nothing but rounding."""
    return 1.0 if abs(after / before - 1) < ROUNDING else after / before


def _detail(ledger: Ledger) -> dict[str, float]:
    """The estimates behind the parts, whether their parts were found or not."""
    memory, posterior = ledger.memory, ledger.memory.posterior
    detail = {
        "phi": posterior.quantile(posterior.phi, 0.5),
        "order": float(1 if memory.higher is None else memory.higher.order),
        "steps": float(memory.steps.df),
    }
    if ledger.lineage is not None:
        detail["rho"] = ledger.lineage.posterior.quantile(ledger.lineage.posterior.phi, 0.5)
    own = memory.variance + memory.steps.variance * float(ledger.stepped.mean())
    for effect in ledger.effects:
        size = effect.effects.variance(effect.dependence)
        detail[f"icc {effect.effects.name}"] = size / (size + own)
    return detail
