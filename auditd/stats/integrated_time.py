"""Integrated autocorrelation time: how many runs are worth one."""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred, lagged_products
from auditd.stats._results import Estimate
from auditd.stats._validate import Floats, choice, probability, vector

# A series shorter than this many times its own autocorrelation time says too little about it
# (common practice: the default of emcee.autocorr; Foreman-Mackey et al. 2013, section 4).
N_TIMES_MIN = 50
# Lags tried at first; four times as many each time that the sequence has not ended among them.
FIRST_LAGS = 64
# Sokal's window, in autocorrelation times (Sokal 1997, section 3, recommends 4 to 10).
WINDOW_TIMES = 5.0
SOURCES = {
    "geyer": "Geyer (1992), Statistical Science 7:473, initial monotone sequence; limits: Sokal (1997)",
    "sokal": "Sokal (1997), in Functional Integration, section 3, window of five times",
}


@dataclass(frozen=True, kw_only=True)
class IntegratedTime(Estimate):
    """Result of `integrated_time`.

    Attributes
    ----------
    tau : integrated autocorrelation time 1 + 2 Σ ρ_k, in runs; below 1 under negative dependence.
    n_effective : n / tau, the independent runs that give the mean as precisely; may exceed n.
    window : the largest lag in the sum.
    low, high : limits of tau.
    """

    tau: float
    n_effective: float
    window: int
    low: float
    high: float


def integrated_time(x: ArrayLike, confidence: float = 0.95, method: str = "geyer") -> IntegratedTime:
    """Estimate the variance of a series' mean relative to independent values, by Geyer's initial sequence.

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    confidence : of the limits of tau.
    method : "geyer", the initial monotone sequence with the estimator of ρ_k of Gelman et al. for one chain;
        or "sokal", all lags up to the first that is at least five times the tau so far.

    Returns
    -------
    IntegratedTime
        `.statistic` and `.tau`; `.low`, `.high` after Sokal, on the log scale.

    Raises
    ------
    BadInput : malformed values.
    NotTestable : fewer than 8 values, constant ones, or a series shorter than 50 times its tau; the error's
        `.estimate` is then tau, usually much too small.

    Assumptions
    -----------
    A stationary series. Estimators differ (Geyer 285, Sokal's window 367 effective of 1000 on one series):
    compare only like with like. A step or trend counts as very long dependence. Geyer's sequence is derived
    for reversible chains; under cyclic dependence it may end early and tau come out too small or too large.

    References
    ----------
    Geyer, C. J. (1992), Statistical Science 7:473-483, section 3.3. Gelman, A. et al. (2013), Bayesian Data
    Analysis, 3rd ed., section 11.5. Sokal, A. (1997), in Functional Integration, section 3 (limits).
    """
    values = vector(x, "x", n_min=8, varying=True)
    half = NormalDist().inv_cdf(0.5 + 0.5 * probability(confidence, "confidence"))
    n = values.size
    choice(method, "method", ("geyer", "sokal"))
    tau, window = (geyer_time if method == "geyer" else sokal_time)(centred(values))
    if n < N_TIMES_MIN * max(tau, 1.0):
        needed = math.ceil(N_TIMES_MIN * max(tau, 1.0))
        raise NotTestable(
            f"at least {N_TIMES_MIN} autocorrelation times, about {needed} values", n, estimate=tau
        )
    spread = math.exp(half * math.sqrt(2.0 * (2.0 * window + 1.0) / n))
    return IntegratedTime(
        statistic=tau,
        n=n,
        source=SOURCES[method],
        tau=tau,
        n_effective=n / tau,
        window=window,
        low=tau / spread,
        high=tau * spread,
    )


def geyer_time(deviations: Floats) -> tuple[float, int]:
    """The autocorrelation time and its largest lag, from deviations from the mean."""
    n = deviations.size
    lags = FIRST_LAGS
    while True:
        lags = min(lags, n - 1)
        products = lagged_products(deviations, lags)
        rho = products / products[0] - 1.0 / (n - 1.0)
        rho[0] = 1.0
        n_pairs = (lags + 1) // 2
        pairs = rho[: 2 * n_pairs].reshape(n_pairs, 2).sum(axis=1)
        ended = np.flatnonzero(pairs <= 0.0)
        if ended.size or lags >= n - 2:
            break
        lags *= 4
    n_kept = int(ended[0]) if ended.size else n_pairs
    return _monotone_sum(rho, pairs, n_kept, n)


def _monotone_sum(rho: Floats, pairs: Floats, n_kept: int, n: int) -> tuple[float, int]:
    if n_kept == 0:
        # r_1 near −1: the variance of the mean is then all but zero; the smallest time that n can show.
        return 1.0 / n, 1
    tau = -1.0 + 2.0 * float(np.minimum.accumulate(pairs[:n_kept]).sum())
    following = 2 * n_kept
    if following < rho.size and rho[following] > 0.0:
        # The next even lag is kept by itself, which lowers the variance of tau under negative dependence.
        tau += float(rho[following])
    return max(tau, 1.0 / n), 2 * n_kept - 1


def sokal_time(deviations: Floats) -> tuple[float, int]:
    """The autocorrelation time up to the first lag of at least five times it, and that lag."""
    n = deviations.size
    lags = FIRST_LAGS
    while True:
        lags = min(lags, n - 1)
        products = lagged_products(deviations, lags)
        times = 2.0 * np.cumsum(products / products[0]) - 1.0
        enough = np.flatnonzero(np.arange(lags + 1) >= WINDOW_TIMES * times)
        if enough.size or lags == n - 1:
            window = int(enough[0]) if enough.size else lags
            return max(float(times[window]), 1.0 / n), window
        lags *= 4
