"""Does each host, build or day have a difference of its own? The error for a claim about hosts in general.

The levels' own differences are random effects. Their variance is estimated by restricted likelihood, and
the variance of the contrast is rescaled by the observed mean square (Hartung & Knapp): in a balanced design
this is exactly the nuisance × cell mean square with levels − 1 degrees of freedom. Half a degree of
freedom's worth of "no interaction" is mixed in: it shortens intervals with 4 levels by 5 % and costs 0.02
of coverage at most.

References
----------
Hartung & Knapp (2001), Statistics in Medicine 20:3875-3889; Sidik & Jonkman (2002), ibid. 21:3153-3159.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from auditd.evidence.fit import SHARES, Model
from auditd.evidence.inputs import Floats
from auditd.evidence.restricted import FIXED_RIDGE, Fits, evaluate

FOUND = 0.05  # p of the levels' own differences below which they are taken to be there
PRIOR_DF = 0.5  # degrees of freedom given to "no interaction"; see above
NO_SLOPES = 1e9  # penalty, in runs, that leaves no slopes
N_FINE = 17  # grid points of the second search
MIN_ERROR_DF = 3  # runs beyond one a level and side that are needed to tell interaction from error


@dataclass(frozen=True, kw_only=True)
class Interaction:
    """Variance of the contrast with the levels' own differences as error, its degrees of freedom, and the
    estimate's move.

    floor : the part of the variance that further runs on the same levels leave; 0 where none is found.
    f, pvalue : mean square of the levels' own differences ÷ error mean square, and its upper tail.
    """

    name: str
    variance: float
    df: float
    shift: float
    floor: float
    f: float
    pvalue: float


def judge_slopes(
    model: Model, place: int, phi: float, ridge: Floats, base_estimate: float
) -> Interaction | None:
    """Fit the slopes of one nuisance at a given φ; None where runs are too few to tell them from error."""
    from scipy.special import fdtrc

    slopes = model.columns.slopes[place]
    n_own = len(slopes) - 1
    moments = model.moments.select(np.concatenate((model.base, slopes)))
    df_full = model.moments.n - model.n_fixed - n_own
    if df_full < MIN_ERROR_DF:
        return None
    contrast = np.concatenate((model.contrast(model.base), np.zeros(len(slopes))))
    mean_runs = model.moments.n / (4 * len(slopes))

    def fit(penalties: Floats) -> Fits:
        grid = np.hstack(
            (np.repeat(ridge[None], len(penalties), 0), np.repeat(penalties[:, None], len(slopes), 1))
        )
        return evaluate(moments, contrast, np.full(len(penalties), phi), grid, model.n_fixed)

    ends = fit(np.array([FIXED_RIDGE * mean_runs, NO_SLOPES * mean_runs]))
    rss = ends.sigma2 * (model.moments.n - model.n_fixed)
    error = float(rss[0]) / df_full
    f = max(float(rss[1] - rss[0]) / n_own / error, 0.0)
    plain = float(ends.unit[1]) * error
    found, estimate = f * plain, float(ends.estimate[1])
    if f > 1:
        found, estimate = _likeliest(fit, mean_runs)
    variance = (n_own * found + PRIOR_DF * plain) / (n_own + PRIOR_DF)
    pvalue = float(fdtrc(n_own, df_full, f))
    return Interaction(
        name=model.problem.crossings[place].name,
        variance=variance,
        df=n_own + PRIOR_DF,
        shift=estimate - base_estimate,
        floor=max(variance - plain, 0.0) if pvalue < FOUND else 0.0,
        f=f,
        pvalue=pvalue,
    )


def _likeliest(fit: Callable[[Floats], Fits], mean_runs: float) -> tuple[float, float]:
    """Variance and estimate at the likeliest penalty, on a grid and on a finer one about its best."""
    inside = np.clip(SHARES, 1e-8, 1 - 1e-6)
    penalties = mean_runs * inside / (1 - inside)
    best = int(np.argmax(fit(penalties).loglik))
    low, high = penalties[max(best - 1, 0)], penalties[min(best + 1, len(penalties) - 1)]
    fine = fit(np.geomspace(low, high, N_FINE))
    place = int(np.argmax(fine.loglik))
    return float(fine.unit[place] * fine.sigma2[place]), float(fine.estimate[place])
