"""Weights over the nuisance parameters, so that an interval pays for not knowing them.

A plug-in coefficient makes intervals too short where few effective runs are left. Here the contrast is
averaged over the restricted likelihood of φ (and of a random effect's share) times a prior. The priors were
chosen for coverage and width, not for belief: φ has density ∝ (1 − φ)^(−1/5), uniform in t = ((1 −
φ)/2)^(4/5); the share B = σ² / (σ² + m·σ²_level) of a random effect has density ∝ B^(−1/2), uniform in √B.
For block differences, 0.55 of the prior mass is on φ = 0: a mean of few differences would else pay for
correlations that nothing speaks for.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields

import numpy as np

from auditd.evidence.inputs import Floats
from auditd.evidence.restricted import Fits

PHI_POWER = (
    1.25  # see above: larger is wider at 60 runs and φ = 0.3, smaller covers less at 60 runs and φ = 0.9
)
PHI_RANGE = (-0.98, 0.999)  # beyond, a stationary fit has no meaning
N_NODES = 25  # grid points for φ alone
N_NODES_PLANE = 13  # grid points an axis when a random effect is estimated too
DROP = 9.0  # log-likelihood below the best that no longer counts: exp(−9)
MIN_KEPT = 9  # grid points that must carry weight before the grid is fine enough
MAX_ZOOMS = 12


def phi_of(t: Floats) -> Floats:
    """Coefficient at the grid's coordinate t."""
    return np.asarray(1 - 2 * t**PHI_POWER)


def coordinate_of(phi: float) -> float:
    """Grid's coordinate of a coefficient."""
    return float(((1 - phi) / 2) ** (1 / PHI_POWER))


def share_of(s: Floats) -> Floats:
    """Share B at the grid's coordinate s."""
    return np.asarray(s * s)


@dataclass(frozen=True, kw_only=True)
class Posterior:
    """Grid points (φ, B) with weights that sum to 1, their fits, and the best point's place."""

    phi: Floats
    share: Floats
    weight: Floats
    fits: Fits
    best: int

    def quantile(self, x: Floats, p: float) -> float:
        """Quantile of a quantity known at the grid points."""
        order = np.argsort(x)
        cumulated = np.cumsum(self.weight[order]) - 0.5 * self.weight[order]
        return float(np.interp(p, cumulated, x[order]))

    def mean(self, x: Floats) -> float:
        """Mean of a quantity known at the grid points."""
        return float(self.weight @ x)


def none_found() -> Posterior:
    """All weight on φ = 0: dependence in time was not asked."""
    zero, one = np.zeros(1), np.ones(1)
    fits = Fits(
        loglik=zero, estimate=zero, unit=one, sigma2=one, coefficients=zero[None], leverage=zero[None]
    )
    return Posterior(phi=zero, share=one, weight=one, fits=fits, best=0)


def explore(fit: Callable[[Floats, Floats], Fits], *, with_share: bool, at_zero: float = 0.0) -> Posterior:
    """Lay a grid, narrow it to where the likelihood is, weigh it.

    `fit` takes φ (G,) and B (G,); `at_zero` is the prior probability of φ = 0 (only without a share).
    """
    t_range = whole = (coordinate_of(PHI_RANGE[1]), coordinate_of(PHI_RANGE[0]))
    s_range = (0.03, 1.0)
    n_nodes = N_NODES_PLANE if with_share else N_NODES
    for _ in range(MAX_ZOOMS):
        t = np.linspace(*t_range, n_nodes)
        s = np.linspace(*s_range, n_nodes) if with_share else np.ones(1)
        fits = fit(phi_of(np.repeat(t, len(s))), share_of(np.tile(s, len(t))))
        plane = fits.loglik.reshape(len(t), len(s))
        kept = plane > plane.max() - DROP
        enough_t, t_range = _narrow(t, kept.any(1), t_range)
        enough_s, s_range = _narrow(s, kept.any(0), s_range) if with_share else (True, s_range)
        if enough_t and enough_s:
            break
    phi, prior = phi_of(np.repeat(t, len(s))), np.ones(len(t) * len(s))
    if at_zero > 0:
        fits = joined(fits, fit(np.zeros(1), np.ones(1)))
        step = (t[1] - t[0]) / (whole[1] - whole[0])
        phi, prior = np.append(phi, 0.0), np.append(prior * step * (1 - at_zero), at_zero)
    weight = np.exp(fits.loglik - fits.loglik.max()) * prior
    return Posterior(
        phi=phi,
        share=share_of(np.resize(s, len(phi))),
        weight=weight / weight.sum(),
        fits=fits,
        best=int(np.argmax(weight)) if at_zero > 0 else int(np.argmax(fits.loglik)),
    )


def joined(first: Fits, second: Fits) -> Fits:
    """Fits of two grids, one after the other."""
    return Fits(
        **{f.name: np.concatenate((getattr(first, f.name), getattr(second, f.name))) for f in fields(Fits)}
    )


def _narrow(nodes: Floats, kept: np.ndarray, limits: tuple[float, float]) -> tuple[bool, tuple[float, float]]:
    """Whether enough nodes carry weight, and the limits one node wider than those which do."""
    index = np.flatnonzero(kept)
    if len(index) >= min(MIN_KEPT, len(nodes) - 4):
        return True, limits
    low, high = max(index[0] - 1, 0), min(index[-1] + 1, len(nodes) - 1)
    return False, (float(nodes[low]), float(nodes[high]))
