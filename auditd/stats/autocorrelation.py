"""Sample autocorrelations with Bartlett's limits."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred, lagged_products
from auditd.stats._results import Estimate
from auditd.stats._validate import Floats, count, probability, vector


@dataclass(frozen=True, kw_only=True)
class Autocorrelation(Estimate):
    """Result of `autocorrelation`: r at lags 0 … lags and their limits; `.statistic` is r at lag 1."""

    r: Floats
    low: Floats
    high: Floats


def autocorrelation(x: ArrayLike, lags: int, confidence: float = 0.95) -> Autocorrelation:
    """Estimate how values depend on those before them, lag by lag.

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    lags : the largest lag, from 1 to n − 1.
    confidence : of each lag's limits by itself.

    Returns
    -------
    Autocorrelation
        `.r` (lags + 1,) with r_0 = 1, r_k = Σ (x_t − m)(x_{t+k} − m) / Σ (x_t − m)²; `.low`, `.high` limits
        r_k ± z √((1 + 2 Σ_{j<k} r_j²) / n), cut at ±1.

    Raises
    ------
    BadInput : malformed values or lags.
    NotTestable : fewer than lags + 1 values, or constant ones.

    Assumptions
    -----------
    A stationary series whose true autocorrelations vanish from lag k on; with long memory the limits are too
    narrow. r_k is biased downwards by about (1 + 3 r_k) / n, so short series look less dependent than they
    are. Steps and trends raise every lag.

    References
    ----------
    Bartlett, M. S. (1946), J. R. Stat. Soc. Suppl. 8:27-41. Box, G. E. P. and Jenkins, G. M. (1976), Time
    Series Analysis, section 2.1.6. NIST/SEMATECH e-Handbook, section 1.3.5.12.
    """
    lags = count(lags, "lags")
    values = vector(x, "x", n_min=2, varying=True)
    n = values.size
    if n < lags + 1:
        raise NotTestable(f"at least lags + 1 = {lags + 1} values", n)
    products = lagged_products(centred(values), lags)
    r = products / products[0]
    earlier = np.concatenate(([0.0], np.cumsum(r[1:-1] ** 2)))
    half = NormalDist().inv_cdf(0.5 + 0.5 * probability(confidence, "confidence"))
    half_width = np.concatenate(([0.0], half * np.sqrt((1.0 + 2.0 * earlier) / n)))
    r[0] = 1.0
    return Autocorrelation(
        statistic=float(r[1]),
        n=n,
        source="Bartlett (1946), J. R. Stat. Soc. Suppl. 8:27; Box & Jenkins (1976), section 2.1.6",
        r=r,
        low=np.maximum(r - half_width, -1.0),
        high=np.minimum(r + half_width, 1.0),
    )
