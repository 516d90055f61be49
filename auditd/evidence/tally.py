"""Variance of the cells' means from its parts, at the estimates and over their uncertainty."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Floats, Ints
from auditd.evidence.levels import LevelEffects
from auditd.evidence.memory import MAX_LAGS, TimeDependence
from auditd.evidence.persistence import inflation, inflation_by, lags_needed, same_cell_pairs
from auditd.evidence.posterior import Posterior

CONFIDENCE = 0.95
TAIL = (1 - CONFIDENCE) / 2
N_DRAWS = 400  # points of a low-discrepancy sequence over the estimates' uncertainty


@dataclass(frozen=True, kw_only=True)
class Lineage:
    """Restart chains: by cell, chains begun and runs that continue one; the coefficient's posterior."""

    begun: Floats
    continued: Floats
    posterior: Posterior


@dataclass(frozen=True, kw_only=True)
class JudgedEffect:
    """Level effects; inflation of their means by what happens within; found: the interval excludes 0."""

    effects: LevelEffects
    dependence: float
    found: bool


@dataclass(frozen=True, kw_only=True)
class Ledger:
    """All that enters the variance of the cells' means.

    count (C,) distinct runs; pairs (lags, C) of one cell along the chains; stepped (C,) share of runs in
    chains with steps; segment_weight (C,) Σ (share of the cell's runs in a segment)².
    """

    count: Floats
    lineage: Lineage | None
    effects: tuple[JudgedEffect, ...]
    memory: TimeDependence
    pairs: Floats
    stepped: Floats
    segment_weight: Floats

    def persistence(self, phi: Floats) -> Floats:
        """Inflation of the cells' means by an AR(1), for each φ: (G, C)."""
        chain_runs = self.memory.chains.mean_runs
        result = inflation(phi, self.pairs, self.count, chain_runs)
        higher, posterior = self.memory.higher, self.memory.posterior
        if higher is None:
            return result
        centre = inflation(
            np.array([posterior.quantile(posterior.phi, 0.5)]), self.pairs, self.count, chain_runs
        )[0]
        longer = inflation_by(higher.autocorrelations(MAX_LAGS), self.pairs, self.count, chain_runs)
        return np.asarray(result * (longer / centre))


def concentration(group: Ints, n_groups: int, segment: Ints) -> tuple[Floats, Floats]:
    """By group: share of runs in segments, and Σ over segments of (share of the group's runs)²."""
    count = np.maximum(np.bincount(group, minlength=n_groups), 1).astype(float)
    stepped = segment >= 0
    if not stepped.any():
        return np.zeros(n_groups), np.zeros(n_groups)
    n_segments = int(segment.max()) + 1
    slots, sizes = np.unique(group[stepped] * n_segments + segment[stepped], return_counts=True)
    share = np.bincount(group[stepped], minlength=n_groups) / count
    return share, np.bincount(slots // n_segments, sizes.astype(float) ** 2, n_groups) / count**2


def dependence_of(
    effects: LevelEffects, memory: TimeDependence, cell_inflation: Floats, phi: float, cell: Ints
) -> float:
    """Expected mean square between levels ÷ within, had levels no effects but dependence within them."""
    n_slots, n_cells = len(effects.means), len(cell_inflation)
    slot = effects.level_of
    size = np.bincount(slot, minlength=n_slots).astype(float)
    chains = memory.chains
    mean_chain = chains.mean_runs
    pairs = same_cell_pairs(slot, n_slots, chains, lags_needed(phi, int(mean_chain) + 1))
    slots = inflation(np.array([phi]), pairs, size, mean_chain)[0]
    df = max(n_slots - n_cells, 1)
    serial = memory.variance * max(float(slots.sum() - cell_inflation.sum()) / df, 0.0)
    _, in_slot = concentration(slot, n_slots, memory.steps.segment)
    _, in_cell = concentration(cell, n_cells, memory.steps.segment)
    runs = np.bincount(cell, minlength=n_cells)
    stepwise = memory.steps.variance * max(float(size @ in_slot - runs @ in_cell) / df, 0.0)
    return (serial + stepwise) / max(effects.within, 1e-300)


def units(ledger: Ledger, rho: Floats) -> Floats:
    """Runs that lineage leaves, by cell: (G, C). A chain counts 1, each further run (1 − ρ)/(1 + ρ)."""
    if ledger.lineage is None:
        return np.broadcast_to(ledger.count, (len(rho), len(ledger.count)))
    kept = np.clip(rho, 0, 1)
    return np.asarray(ledger.lineage.begun + ((1 - kept) / (1 + kept))[:, None] * ledger.lineage.continued)


def total(
    ledger: Ledger, left: Floats, batch: list[Floats], step: Floats, persistence: Floats, *, serial: bool
) -> Floats:
    """Effective number over all cells, for G points.

    Parameters
    ----------
    left : (G, C) runs that lineage leaves. batch : level variances (G,), one array a nuisance. step : (G,)
        variance between segments.
    persistence : (G, C) inflation by autocorrelation. serial : whether steps and autocorrelation count, or
        are spread evenly over runs.
    """
    own = ledger.memory.variance
    spread = step[:, None] * ledger.stepped
    single = own + spread
    variance = (own * (persistence if serial else 1.0) + (0.0 if serial else spread)) / left
    if serial:
        variance = variance + step[:, None] * ledger.segment_weight
    for effect, size in zip(ledger.effects, batch, strict=True):
        variance = variance + size[:, None] * effect.effects.concentration
        single = single + size[:, None]
    return np.asarray((single / variance).sum(axis=1))


def draws(ledger: Ledger) -> Floats:
    """Effective numbers over the uncertainty of every part, found or not."""
    from scipy.special import chdtri

    u = lattice(3 + len(ledger.effects), N_DRAWS)
    phi = _quantiles(ledger.memory.posterior, u[0])
    rho = _quantiles(ledger.lineage.posterior, u[1]) if ledger.lineage else np.zeros(N_DRAWS)
    steps = ledger.memory.steps
    step = np.zeros(N_DRAWS)
    if steps.df:
        step = steps.variance * steps.df / chdtri(float(steps.df), u[2])
    batch = [e.effects.variance_at(e.dependence, u[3 + i]) for i, e in enumerate(ledger.effects)]
    return total(ledger, units(ledger, rho), batch, step, ledger.persistence(phi), serial=True)


def _quantiles(posterior: Posterior, p: Floats) -> Floats:
    order = np.argsort(posterior.phi)
    weight = posterior.weight[order]
    return np.interp(p, np.cumsum(weight) - 0.5 * weight, posterior.phi[order])


def lattice(n_axes: int, n_points: int) -> Floats:
    """Low-discrepancy points in the unit cube: (n_axes, n_points).

    References
    ----------
    Niederreiter (1992), Random Number Generation and Quasi-Monte Carlo Methods, section 4.1 (Kronecker
    sequences); the powers of the root of x^(d+1) = x + 1 are common practice.
    """
    root = 2.0
    for _ in range(60):
        root = (1 + root) ** (1 / (n_axes + 1))
    powers = root ** -np.arange(1, n_axes + 1)
    return np.asarray((0.5 + powers[:, None] * np.arange(1, n_points + 1)) % 1.0)
