"""A simultaneous envelope for a normal quantile plot whose line is drawn through the quartiles.

Every order statistic that is drawn gets the same local level, chosen so that a normal sample stays inside at
all of them together with the stated probability (Aldor-Noiman, Brown, Buja, Rolke & Stine 2013, The American
Statistician 67:249-260: equal local levels; Myllymäki et al. 2017, JRSS B 79:381-404: the level from the
extreme ranks of simulated curves). Samples are standardised by their own quartiles as the plotted one is, so
that estimating centre and scale is allowed for. The order statistics are drawn exactly and only where needed:
uniform ones are ratios of sums of exponential variates (Rényi 1953, Acta Math. Hung. 4:191-231).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

N_SIMULATED = 4000
"""Simulated samples; the envelope's probability then has a standard error of 0.35 %."""
N_EXTREMES = 25
"""Order statistics drawn one by one at each end."""
N_MIDDLE = 100
"""Order statistics drawn between the ends."""
QUARTILE_Z = 0.6744897501960817
"""Upper quartile of the standard normal law."""
SEED = 20130806
N_MIN = 8
"""Fewest values for quartiles that mean something."""


@dataclass(frozen=True, kw_only=True)
class Envelope:
    """Ranks that are drawn, counted from 1, normal quantiles there, and limits in quartile units."""

    ranks: Ints
    quantiles: Floats
    low: Floats
    high: Floats
    local_level: float


def drawn_ranks(n: int) -> Ints:
    """Return the ranks that are drawn of n: all of few; both ends, and evenly between, of many."""
    if n <= 2 * N_EXTREMES + N_MIDDLE:
        return np.arange(1, n + 1)
    middle = np.round(np.linspace(N_EXTREMES, n + 1 - N_EXTREMES, N_MIDDLE + 2)).astype(np.int64)
    ends = np.arange(1, N_EXTREMES + 1)
    return np.unique(np.concatenate((ends, middle, n + 1 - ends, quartile_ranks(n))))


def quartile_ranks(n: int) -> Ints:
    """Return the ranks that stand for the quartiles and the median."""
    return np.clip(np.round(np.array([0.25, 0.5, 0.75]) * (n + 1)).astype(np.int64), 1, n)


def quartile_units(ordered: Floats, ranks: Ints, n: int) -> Floats:
    """Return order statistics, shape (…, ranks), less the median in units of the interquartile half-range.

    The unit is that of a normal law's standard deviation.
    """
    first, middle, third = np.searchsorted(ranks, quartile_ranks(n))
    scale = (ordered[..., third] - ordered[..., first]) / (2 * QUARTILE_Z)
    scale = np.where(scale > 0, scale, np.nan)
    units: Floats = (ordered - ordered[..., middle, None]) / scale[..., None]
    return units


@lru_cache(maxsize=16)
def normal_envelope(n: int, confidence: float = 0.95) -> Envelope:
    """Return the envelope for n values; n at least `N_MIN`."""
    from scipy.special import ndtri

    ranks = drawn_ranks(n)
    rng = np.random.default_rng([SEED, n])
    gaps = np.diff(ranks, prepend=0, append=n + 1).astype(np.float64)
    sums = np.cumsum(rng.standard_gamma(gaps, size=(N_SIMULATED, len(gaps))), axis=1)
    curves = quartile_units(ndtri(sums[:, :-1] / sums[:, -1:]), ranks, n)
    ordered = np.sort(curves, axis=0)
    depth = _extreme_rank(curves)
    k = max(int(np.quantile(depth, 1 - confidence, method="lower")), 1)
    return Envelope(
        ranks=ranks,
        quantiles=ndtri((ranks - 0.375) / (n + 0.25)),
        low=ordered[k - 1],
        high=ordered[-k],
        local_level=2 * k / (N_SIMULATED + 1),
    )


def _extreme_rank(curves: Floats) -> Ints:
    """Return each curve's smallest rank, from either end, over all points where curves differ."""
    ranks = np.argsort(np.argsort(curves, axis=0, kind="stable"), axis=0, kind="stable") + 1
    both = np.minimum(ranks, len(curves) + 1 - ranks)
    differ = np.ptp(curves, axis=0) > 0
    smallest: Ints = both[:, differ].min(axis=1)
    return smallest
