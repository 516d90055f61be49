"""Dependence along time within the cells' residuals: steps first, then autocorrelation."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from auditd.evidence.chains import Stretches, along_order, unlinked, within
from auditd.evidence.higher import Autoregression, choose_order, innovations_of, looks_white
from auditd.evidence.inputs import Codes, Floats, Ints
from auditd.evidence.moments import Moments, sum_moments
from auditd.evidence.posterior import Posterior, explore, none_found
from auditd.evidence.restricted import FIXED_RIDGE, Fits, evaluate
from auditd.evidence.sequence import InitialSequence, initial_sequence
from auditd.evidence.steps import MIN_CHAIN_RUNS, segments

MIN_MEAN_CHAIN = 4.0  # runs a chain, on average, for dependence within a nuisance's levels to be asked
MAX_COLUMNS = 80  # columns of the restricted likelihood; beyond, residuals are taken as they are
MIN_LEVEL_RUNS = (
    8.0  # runs a level, on average, for time to be asked where runs of one level follow each other
)
MIN_HIGHER_RUNS = 50.0  # runs a level, on average, for more than an AR(1): removed means bias further lags
MIN_FREE_RUNS = 5  # runs beyond the means, for time to be asked
SMALLEST = 1e-24  # variance (of residuals on a scale of 1) below which only rounding is left
MAX_LAGS = 3000  # lags to which autocorrelations are summed
MAX_STEP_CHAINS = 200  # chains that are searched for steps, the longest first


@dataclass(frozen=True, kw_only=True)
class Steps:
    """Segments of constant level.

    segment : (n,) code, −1 in chains without a step. owner (S,) : chain of each segment. variance : between
        the segments of a chain; df : segments beyond one a chain.
    """

    along: str
    segment: Ints
    owner: Ints
    variance: float
    df: int

    @property
    def n_segments(self) -> int:
        """Segments in chains that have a step."""
        return len(self.owner)


@dataclass(frozen=True, kw_only=True)
class TimeDependence:
    """What was found along time.

    steps : of the level. posterior : of the AR(1) coefficient along `chains`. higher : an AR(p) where the
        AR(1) leaves innovations that are not white.
    variance : of one run about its segment.
    """

    chains: Stretches
    steps: Steps
    posterior: Posterior
    higher: Autoregression | InitialSequence | None
    variance: float


def forget(residual: Floats, n_spent: int) -> TimeDependence:
    """No dependence in time, where no order is known."""
    nothing = np.empty(0, dtype=np.int64)
    return TimeDependence(
        chains=unlinked(len(residual)),
        steps=Steps(
            along="nothing", segment=np.full(len(residual), -1, np.int64), owner=nothing, variance=0.0, df=0
        ),
        posterior=none_found(),
        higher=None,
        variance=max(float(residual @ residual) / max(len(residual) - n_spent, 1), SMALLEST),
    )


def remember(residual: Floats, level: Ints, n_spent: int, nuisances: Mapping[str, Codes]) -> TimeDependence:
    """Find steps and fit the autocorrelation of residuals about n_spent means, all within `level` (codes)."""
    candidates: list[Stretches] = [along_order(len(residual))]
    candidates += [
        within(codes, name)
        for name, codes in nuisances.items()
        if len(residual) / codes.n_levels >= MIN_MEAN_CHAIN
    ]
    steps, rest = find_steps(residual, choose(residual, candidates))
    chains = choose(rest, candidates)
    posterior = _fit(residual, level, steps, chains)
    return TimeDependence(
        chains=chains,
        steps=steps,
        posterior=posterior,
        higher=_higher(rest, chains, posterior)
        if len(rest) >= MIN_HIGHER_RUNS * (int(level.max()) + 1)
        else None,
        variance=max(float(rest @ rest) / max(len(rest) - n_spent - steps.df, 1), SMALLEST),
    )


def _higher(rest: Floats, chains: Stretches, posterior: Posterior) -> Autoregression | InitialSequence | None:
    """An AR(p) where the AR(1) does not whiten; the autocorrelations themselves where neither does."""
    if len(posterior.phi) == 1:
        return None
    error = chains.innovations(rest, posterior.quantile(posterior.phi, 0.5))
    if looks_white(error, chains):
        return None
    model = choose_order(rest, chains)
    if model is None or looks_white(innovations_of(rest, chains, model), chains, model.order):
        return model
    return initial_sequence(rest, chains, MAX_LAGS)


def choose(residual: Floats, candidates: Sequence[Stretches]) -> Stretches:
    """The chains with the largest lag-1 correlation in standard errors."""
    if len(candidates) == 1:
        return candidates[0]
    scores = [
        abs(float(residual[c.child] @ residual[c.parent])) / max(len(c.child), 1) ** 0.5 for c in candidates
    ]
    return candidates[int(np.argmax(scores))]


def find_steps(residual: Floats, chains: Stretches) -> tuple[Steps, Floats]:
    """Steps of every chain, and the residuals about the segments' means."""
    segment = np.full(len(residual), -1, dtype=np.int64)
    owner: list[int] = []
    for chain, runs in enumerate(chains.longest(MAX_STEP_CHAINS, MIN_CHAIN_RUNS)):
        starts = segments(residual[runs])
        if len(starts) > 1:
            segment[runs] = len(owner) + np.searchsorted(starts, np.arange(len(runs)), side="right") - 1
            owner += [chain] * len(starts)
    if not owner:
        nothing = np.empty(0, dtype=np.int64)
        return Steps(along=chains.along, segment=segment, owner=nothing, variance=0.0, df=0), residual
    return _measure(residual, chains.along, segment, np.unique(owner, return_inverse=True)[1])


def _measure(residual: Floats, along: str, segment: Ints, owner: Ints) -> tuple[Steps, Floats]:
    """Variance between the segments of a chain by the analysis of variance."""
    stepped = segment >= 0
    count = np.bincount(segment[stepped]).astype(float)
    mean = np.bincount(segment[stepped], residual[stepped]) / count
    runs = np.bincount(owner, count)
    grand = np.bincount(owner, count * mean) / runs
    df = len(owner) - len(runs)
    typical = float((runs - np.bincount(owner, count**2) / runs).sum()) / df
    between = float(count @ (mean - grand[owner]) ** 2) / df
    rest = residual.copy()
    rest[stepped] -= mean[segment[stepped]]
    return Steps(along=along, segment=segment, owner=owner, variance=between / typical, df=df), rest


def _fit(residual: Floats, level: Ints, steps: Steps, chains: Stretches) -> Posterior:
    """Restricted likelihood of φ about the means; with too many of these, moments are corrected instead."""
    segment, n_segments, n_levels = steps.segment, steps.n_segments, int(level.max()) + 1
    n_fixed = n_levels + steps.df
    same = level[chains.child] == level[chains.parent]
    crowded = len(level) < MIN_LEVEL_RUNS * n_levels and 2 * int(same.sum()) > len(same)
    if crowded or len(level) - n_fixed < MIN_FREE_RUNS or float(residual @ residual) <= SMALLEST:
        return none_found()
    many = n_levels > MAX_COLUMNS
    columns = 1 if many else n_levels
    group = np.zeros_like(level) if many else level
    _, first, code = np.unique(group * (n_segments + 1) + segment + 1, return_index=True, return_inverse=True)
    table = np.hstack(
        (
            (group[first][:, None] == np.arange(columns)).astype(float),
            (segment[first][:, None] == np.arange(n_segments)).astype(float),
        )
    )
    moments = sum_moments(residual, code, table, chains)
    if many:
        moments = _unbiased_moments(moments, level, chains)
    ridge = np.concatenate(
        (np.zeros(columns), np.full(n_segments, FIXED_RIDGE * len(residual) / (n_segments + 1)))
    )
    c = np.zeros(len(ridge))
    c[0] = 1.0

    def fit(phi: Floats, _share: Floats) -> Fits:
        return evaluate(moments, c, phi, np.broadcast_to(ridge, (len(phi), len(ridge))), n_fixed)

    return explore(fit, with_share=False)


def _unbiased_moments(moments: Moments, level: Ints, chains: Stretches) -> Moments:
    """Undo what removing many means did to the sums: −σ²/n_level for each pair within a level."""
    n, n_levels = moments.n, int(level.max()) + 1
    runs = np.bincount(level)
    raised = n / max(n - n_levels, 1)
    variance = moments.square[0] * raised / n
    same = level[chains.child] == level[chains.parent]
    lost = float((1 / runs[level[chains.child[same]]]).sum())
    y0, y1, y2 = moments.square
    return replace(moments, square=(y0 * raised, y1 + 2 * variance * lost, y2 * raised))
