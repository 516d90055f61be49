"""Fit a comparison: choose the chains, weigh the parameters, read off estimate and variance."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from auditd.evidence.chains import Stretches, along_order, unlinked, within
from auditd.evidence.crossing import NuisanceCrossing
from auditd.evidence.inputs import Floats, Ints
from auditd.evidence.moments import Moments
from auditd.evidence.posterior import Posterior, explore
from auditd.evidence.problem import Columns, Problem, collect, lay_columns
from auditd.evidence.restricted import FIXED_RIDGE, Fits, evaluate

MIN_CHAIN_RUNS = 4.0  # mean length of a nuisance's chains below which dependence within them is not asked
SLOPES_FOUND = 0.05  # p of the levels' own differences below which they stand in the model of the errors
N_SHARES = 24  # grid points for one random effect's share alone
NO_OWN = 1.0  # p of the own differences of a nuisance whose runs are too few to ask
SHARES = np.linspace(0.02, 1.0, N_SHARES) ** 2


@dataclass(frozen=True, kw_only=True)
class OwnDifferences:
    """F and its upper tail of the differences that a nuisance of few levels has of its own."""

    crossing: NuisanceCrossing
    f: float
    pvalue: float


@dataclass(frozen=True, kw_only=True)
class Model:
    """Columns, sums and bookkeeping that every evaluation needs.

    base : columns of cells, of levels, and of the n_own differences that nuisances of few levels plainly have
        of their own; own : what was found about those. used : base, and the slopes of nuisances whose levels
        plainly differ in their differences, with the penalties slope_penalty: left out, they would be taken
        for autocorrelation.
    """

    problem: Problem
    columns: Columns
    chains: Stretches
    moments: Moments
    base: Ints
    n_own: int
    own: tuple[OwnDifferences, ...]
    used: Ints
    slope_penalty: Floats
    n_fixed: int

    def used_ridge(self, share: Floats, lead: int | None, others: dict[int, float]) -> Floats:
        """As `ridge`, for the base columns and the slopes in use."""
        slopes = np.broadcast_to(self.slope_penalty, (len(share), len(self.slope_penalty)))
        return np.hstack((self.ridge(share, lead, others), slopes))

    def ridge(self, share: Floats, lead: int | None, others: dict[int, float]) -> Floats:
        """Penalty of each base column at each share of the random effect `lead`; `others` have theirs."""
        result = np.zeros((len(share), len(self.problem.contrast)))
        parts = [result]
        for place, crossing in enumerate(self.problem.crossings):
            if place not in self.columns.levels:
                continue
            shares = share if place == lead else np.full(len(share), others.get(place, 0.5))
            penalty = level_penalty(crossing, shares, self.moments.n)
            parts.append(np.repeat(penalty[:, None], crossing.codes.n_levels, axis=1))
        parts.append(np.full((len(share), self.n_own), FIXED_RIDGE * self.moments.n))
        return np.hstack(parts)

    def contrast(self, columns: Ints) -> Floats:
        """The contrast on the given columns, of which the cells come first."""
        return np.concatenate((self.problem.contrast, np.zeros(len(columns) - len(self.problem.contrast))))


def level_penalty(crossing: NuisanceCrossing, share: Floats, n: int) -> Floats:
    """Innovation variance ÷ level variance: nearly 0 for a block, from the share B for a random effect."""
    mean_runs = n / crossing.codes.n_levels
    if crossing.kind == "block":
        return np.full(len(share), FIXED_RIDGE * mean_runs)
    inside = np.clip(share, 1e-8, 1 - 1e-6)
    return np.asarray(mean_runs * inside / (1 - inside))


def build(problem: Problem) -> Model:
    """Lay the columns and choose the chains along which the errors look most dependent."""
    columns = lay_columns(problem)
    own = {place: own_differences(problem, columns, place) for place in columns.own}
    plain = [columns.own[place] for place, one in own.items() if one.pvalue < SLOPES_FOUND]
    base = np.concatenate([columns.base(), *plain])
    n_own = sum(map(len, plain))
    penalties = {place: plain_slope_penalty(problem, columns, base, place) for place in columns.slopes}
    active = [place for place, penalty in penalties.items() if penalty is not None]
    used = np.concatenate([base, *(columns.slopes[place] for place in active)])
    slope_penalty = np.concatenate(
        [np.zeros(0), *(np.full(len(columns.slopes[place]), penalties[place]) for place in active)]
    )
    chains = choose_chains(problem, columns, used)
    spent = [c.codes.n_levels - 1 for c in problem.crossings if c.kind == "block"]
    return Model(
        problem=problem,
        columns=columns,
        chains=chains,
        moments=collect(problem, columns, chains),
        base=base,
        n_own=n_own,
        own=tuple(own.values()),
        used=used,
        slope_penalty=slope_penalty,
        n_fixed=problem.n_cells_spent + sum(spent) + n_own,
    )


def choose_chains(problem: Problem, columns: Columns, used: Ints) -> Stretches:
    """The order or a nuisance's levels: the larger lag-1 correlation of residuals, in standard errors."""
    n = len(problem.y)
    if not problem.ordered:
        return unlinked(n)
    candidates: list[Stretches] = [along_order(n)]
    for crossing in problem.crossings:
        if n / crossing.codes.n_levels >= MIN_CHAIN_RUNS:
            candidates.append(within(crossing.codes, crossing.name))  # noqa: PERF401  (a typed list)
    if len(candidates) == 1:
        return candidates[0]
    residual = plain_residuals(problem, columns, used)
    size = float(residual @ residual) / n
    scores = [
        abs(float(residual[c.child] @ residual[c.parent])) / (max(size, 1e-300) * max(len(c.child), 1) ** 0.5)
        for c in candidates
    ]
    return candidates[int(np.argmax(scores))]


def plain_slope_penalty(problem: Problem, columns: Columns, base: Ints, place: int) -> float | None:
    """Error variance ÷ variance of a nuisance's own differences; None where F does not find any."""
    slopes = columns.slopes[place]
    f, pvalue = plain_f(problem, columns, base, slopes, len(slopes) - 1)
    if f <= 1 or pvalue > SLOPES_FOUND:
        return None
    return max(len(problem.y) / (4 * len(slopes)) / (f - 1), 1e-6)


def own_differences(problem: Problem, columns: Columns, place: int) -> OwnDifferences:
    """Ask a nuisance of few levels whether the difference of the sides is the same at each."""
    extra = columns.own[place]
    f, pvalue = plain_f(problem, columns, columns.base(), extra, len(extra))
    return OwnDifferences(crossing=problem.crossings[place], f=f, pvalue=pvalue)


def plain_f(problem: Problem, columns: Columns, base: Ints, extra: Ints, n_extra: int) -> tuple[float, float]:
    """F of further columns of rank n_extra by ordinary least squares, and its upper tail."""
    from scipy.special import fdtrc

    df = len(problem.y) - len(base) - n_extra
    if df < 1:
        return 0.0, NO_OWN
    small = plain_residuals(problem, columns, base)
    full = plain_residuals(problem, columns, np.concatenate((base, extra)))
    error = max(float(full @ full) / df, 1e-300)
    f = max((float(small @ small) - float(full @ full)) / n_extra / error, 0.0)
    return f, float(fdtrc(n_extra, df, f))


def plain_residuals(problem: Problem, columns: Columns, used: Ints) -> Floats:
    """Residuals of ordinary least squares on some of the columns."""
    table = columns.table[:, used]
    count = np.bincount(columns.code)
    sums = np.bincount(columns.code, problem.y)
    gram = (table.T * count) @ table
    index = np.arange(len(gram))
    gram[index, index] += FIXED_RIDGE * max(len(problem.y) / len(gram), 1.0)
    return np.asarray(problem.y - (table @ np.linalg.solve(gram, table.T @ sums))[columns.code])


def weigh_parameters(model: Model) -> tuple[Posterior, dict[int, float], int | None]:
    """Posterior over φ and the strongest partly crossed effect; other shares are set by likelihood."""
    random = [place for place, c in enumerate(model.problem.crossings) if c.kind == "random"]
    moments, c = model.moments.select(model.used), model.contrast(model.used)
    others: dict[int, float] = {}
    drops: dict[int, float] = {}
    for place in random:
        fits = evaluate(
            moments, c, np.zeros(N_SHARES), model.used_ridge(SHARES, place, others), model.n_fixed
        )
        others[place] = float(SHARES[int(np.argmax(fits.loglik))])
        drops[place] = float(fits.loglik.max() - fits.loglik[-1])
    lead = max(random, key=drops.__getitem__) if random else None

    ordered = model.problem.ordered

    def fit(phi: Floats, share: Floats) -> Fits:
        known = phi if ordered else np.zeros_like(phi)
        return evaluate(moments, c, known, model.used_ridge(share, lead, others), model.n_fixed)

    posterior = explore(fit, with_share=lead is not None, at_zero=model.problem.at_zero)
    if not ordered:
        posterior = replace(posterior, phi=np.zeros_like(posterior.phi))
    return posterior, others, lead


def errors_of(model: Model, coefficients: Floats, leverage: Floats, phi: float) -> tuple[Floats, Floats]:
    """Innovations of the runs and each innovation's weight in the estimate."""
    table = model.columns.table[:, model.used]
    residual = model.problem.y - (table @ coefficients)[model.columns.code]
    weight = (table @ leverage)[model.columns.code]
    return model.chains.innovations(residual, phi), model.chains.innovations(weight, phi)
