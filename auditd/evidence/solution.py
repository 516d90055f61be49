"""From the weighted fits to one estimate, one variance, one interval."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from auditd.evidence.fit import Model, OwnDifferences, errors_of, weigh_parameters
from auditd.evidence.higher import choose_order, looks_white, whitened_fit
from auditd.evidence.inputs import Floats
from auditd.evidence.interaction import Interaction, judge_slopes
from auditd.evidence.mixture import half_width
from auditd.evidence.posterior import Posterior
from auditd.evidence.restricted import Fits
from auditd.evidence.spread import SideSpread, by_side

ROBUST_T = 0.975  # where interactions of several nuisances are ranked by the width that they give


@dataclass(frozen=True, kw_only=True)
class Solution:
    """Result on the scale of the fit.

    variances, marginals : (G,) variance of the estimate, and variance of one run, at each grid point;
        weights (G,) of the points.
    scatter : what a nuisance's own differences make of the variances, as a factor.
    scatter_df : degrees of freedom of the interaction's mean square, infinite where none enters. own : what
        nuisances of few levels show. order : of the autoregression, 0 where no order is known.
    """

    estimate: float
    half: float
    df: float
    variances: Floats
    marginals: Floats
    weights: Floats
    phi: float
    scatter: float
    scatter_df: float
    interaction: Interaction | None
    own: tuple[OwnDifferences, ...]
    order: int

    def quantile(self, x: Floats, p: float) -> float:
        """Quantile of a quantity known at the grid points."""
        order = np.argsort(x)
        cumulated = np.cumsum(self.weights[order]) - 0.5 * self.weights[order]
        return float(np.interp(p, cumulated, x[order]))


def solve(model: Model, confidence: float) -> Solution:
    """Weigh the parameters, correct for unequal spread and the levels' own differences, take the interval."""
    posterior, others, lead = weigh_parameters(model)
    fits, best = posterior.fits, posterior.best
    phi = float(posterior.phi[best])
    error, weight = errors_of(model, fits.coefficients[best], fits.leverage[best], phi)
    spread = _spread(model, fits, best, error, weight)
    centre = posterior.mean(fits.estimate)
    variances = fits.unit * fits.sigma2 * spread.ratio
    half = half_width(centre, fits.estimate, np.sqrt(variances), posterior.weight, spread.df, confidence)
    uncertainty = _relative_variance(posterior, np.log(variances))
    df = 1 / (1 / spread.df + 0.5 * uncertainty)
    ridge = model.ridge(posterior.share[best : best + 1], lead, others)[0]
    longer = _longer_memory(model, posterior, error, np.concatenate((ridge, model.slope_penalty)))
    if longer is not None:
        centre += longer.shift
        half *= longer.factor**0.5
        variances = variances * longer.factor
    solution = Solution(
        estimate=centre,
        half=half,
        df=df,
        variances=variances,
        marginals=fits.sigma2 / (1 - posterior.phi**2),
        weights=posterior.weight,
        phi=posterior.mean(posterior.phi),
        scatter=1.0,
        scatter_df=float("inf"),
        interaction=None,
        own=model.own,
        order=int(model.problem.ordered) if longer is None else longer.order,
    )
    own = [
        judge_slopes(model, place, phi, ridge, float(fits.estimate[best])) for place in model.columns.slopes
    ]
    scatter = _widest(own)
    if scatter is None:
        return solution
    factor = scatter.variance / float(fits.unit[best] * fits.sigma2[best])
    return _scattered(solution, scatter, factor, 1 / (1 / scatter.df + 0.5 * uncertainty), confidence)


def _spread(model: Model, fits: Fits, best: int, error: Floats, weight: Floats) -> SideSpread:
    """Unequal spread of the sides at the best grid point."""
    return by_side(
        error,
        weight,
        model.problem.side,
        model.problem.cell,
        float(fits.unit[best]),
        float(fits.sigma2[best]),
        float(model.moments.n - model.n_fixed),
    )


def _scattered(
    solution: Solution, scatter: Interaction, factor: float, df: float, confidence: float
) -> Solution:
    """The same with a nuisance's own differences as the error."""
    from scipy.special import stdtrit

    p = 0.5 + confidence / 2
    return replace(
        solution,
        estimate=solution.estimate + scatter.shift,
        half=solution.half * factor**0.5 * float(stdtrit(df, p) / stdtrit(solution.df, p)),
        df=df,
        scatter=factor,
        scatter_df=scatter.df,
        interaction=scatter,
    )


@dataclass(frozen=True, kw_only=True)
class Longer:
    """What an AR(p) makes of the AR(1)'s estimate and variance."""

    order: int
    shift: float
    factor: float


def _longer_memory(model: Model, posterior: Posterior, error: Floats, ridge: Floats) -> Longer | None:
    """Refit with an AR(p) where innovations are not white; uncertainty carries over in proportion."""
    if not model.problem.ordered or looks_white(error, model.chains):
        return None
    fits, best = posterior.fits, posterior.best
    table = model.columns.table[:, model.used]
    code = model.columns.code
    residual = model.problem.y - (table @ fits.coefficients[best])[code]
    chosen = choose_order(residual, model.chains)
    if chosen is None:
        return None
    refit = whitened_fit(
        model.problem.y, code, table, model.contrast(model.used), ridge, model.chains, chosen, model.n_fixed
    )
    if refit is None:
        return None
    estimate, variance = refit
    before = float(fits.unit[best] * fits.sigma2[best])
    return Longer(
        order=len(chosen.coefficients), shift=estimate - float(fits.estimate[best]), factor=variance / before
    )


def _relative_variance(posterior: Posterior, log_variances: Floats) -> float:
    mean = posterior.mean(log_variances)
    return posterior.mean((log_variances - mean) ** 2)


def _widest(found: list[Interaction | None]) -> Interaction | None:
    """The nuisance whose own differences make the widest interval."""
    from scipy.special import stdtrit

    known = [item for item in found if item is not None]
    if not known:
        return None
    return max(known, key=lambda item: item.variance * float(stdtrit(item.df, ROBUST_T)) ** 2)
