"""Mann-Kendall test of a trend, with Sen's slope."""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import NormalDist
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred, lagged_products
from auditd.stats._results import HypothesisTest
from auditd.stats._sen_slope import kendall_score, middle_ranks, n_slopes, slopes_at, tie_sizes
from auditd.stats._validate import Floats, ascending_times, choice, count, probability, vector

# Autocorrelations of the ranks beyond ±1.96 / √n enter the correction (Hamed & Rao 1998, section 5).
SIGNIFICANT = 1.959963984540054


@dataclass(frozen=True, kw_only=True)
class MannKendall(HypothesisTest):
    """Result of `mann_kendall`.

    Attributes
    ----------
    s : pairs that rise less pairs that fall.
    var_s : variance of s under the null, with ties and the correction if one was asked for.
    tau : s over all n (n − 1) / 2 pairs.
    slope, slope_low, slope_high : Sen's slope, a unit of x for each unit of time (or run), and its limits.
    correction : None or "hamed-rao".
    """

    s: int
    var_s: float
    tau: float
    slope: float
    slope_low: float
    slope_high: float
    correction: str | None


def mann_kendall(
    x: ArrayLike,
    times: ArrayLike | None = None,
    correction: Literal["hamed-rao"] | None = None,
    *,
    lags: int | None = None,
    confidence: float = 0.95,
) -> MannKendall:
    """Detect a monotone trend by the balance of rising and falling pairs.

    Null hypothesis: the values come in random order. Alternative, two-sided: they tend to rise, or to fall,
    with time.

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    times : (n,) ascending times, for the slope's unit and unequal spacing; equal ones make no pair.
    correction : "hamed-rao" for a variance that allows for autocorrelated values.
    lags : with the correction, the largest lag that enters; all n − 1 if left out, as published.
    confidence : of the limits of Sen's slope.

    Returns
    -------
    MannKendall
        `.statistic` z with continuity correction, two-sided normal `.pvalue`. Above 2,000 values the slopes
        are searched for instead of sorted, to within a thousandth of their standard error.

    Raises
    ------
    BadInput : malformed values, times that descend, unknown correction.
    NotTestable : fewer than 4 values, constant values or times, or a correction that leaves no
        positive variance.

    Assumptions
    -----------
    Independent values without the correction: positive autocorrelation raises the false-alarm rate many-fold.
    With it, evenly spaced ones; the correction over all lags is itself noisy and can turn z = −0.9 into −3.8
    when negative seasonal correlations enter: `lags` of a few restrains it.

    References
    ----------
    Mann, H. B. (1945), Econometrica 13:245-259. Kendall, M. G. (1975), Rank Correlation Methods, chapter 4.
    Sen, P. K. (1968), J. Am. Stat. Assoc. 63:1379-1389. Hamed, K. H. and Rao, A. R. (1998), J. Hydrology
    204:182-196.
    """
    choice(correction, "correction", (None, "hamed-rao"))
    values = vector(x, "x", n_min=4, varying=True)
    n = values.size
    clock = np.arange(n, dtype=np.float64) if times is None else ascending_times(times, n)
    half = NormalDist().inv_cdf(0.5 + 0.5 * probability(confidence, "confidence"))
    if lags is not None:
        lags = count(lags, "lags", high=n - 1)
    s = kendall_score(clock, values)
    var_s = variance(values, clock)
    total = n_slopes(clock)
    if correction is not None:
        var_s *= _correction_factor(values, clock, lags)
    spread = half * math.sqrt(var_s)
    low = max(round(0.5 * (total - spread)) - 1, 0)
    high = min(round(0.5 * (total + spread)), total - 1)
    lower, first, second, upper = slopes_at(clock, values, (low, *middle_ranks(clock), high))
    z = (s - (s > 0) + (s < 0)) / math.sqrt(var_s)
    return MannKendall(
        statistic=z,
        n=n,
        source="Mann (1945), Econometrica 13:245; Kendall (1975); Sen (1968), J. Am. Stat. Assoc. 63:1379",
        pvalue=math.erfc(abs(z) / math.sqrt(2.0)),
        null="the values come in random order",
        s=s,
        var_s=var_s,
        tau=s / (0.5 * n * (n - 1.0)),
        slope=0.5 * (first + second),
        slope_low=lower,
        slope_high=upper,
        correction=correction,
    )


def variance(x: Floats, times: Floats) -> float:
    """Of S under the null, with ties of values and of times (Kendall 1975, equation 4.4)."""
    n, a, b = float(x.size), tie_sizes(x), tie_sizes(times)
    first = _cubic(np.array([n])) - _cubic(a) - _cubic(b)
    second = float(np.sum(a * (a - 1.0) * (a - 2.0)) * np.sum(b * (b - 1.0) * (b - 2.0)))
    third = float(np.sum(a * (a - 1.0)) * np.sum(b * (b - 1.0)))
    return first / 18.0 + second / (9.0 * n * (n - 1.0) * (n - 2.0)) + third / (2.0 * n * (n - 1.0))


def _cubic(sizes: Floats) -> float:
    return float(np.sum(sizes * (sizes - 1.0) * (2.0 * sizes + 5.0)))


def _grid(times: Floats) -> Floats:
    """The times; of a regular grid with missing places the closed-up grid, as the published code has it."""
    steps = np.diff(times)
    step = float(np.median(steps))
    if step <= 0.0 or np.any(np.abs(steps / step - np.rint(steps / step)) > 1e-9):
        return times
    return np.asarray(step * np.arange(times.size))


def _correction_factor(x: Floats, times: Floats, lags: int | None) -> float:
    """Hamed and Rao's n / n*: from the significant autocorrelations of the detrended values' ranks."""
    from scipy.stats import rankdata

    n = x.size
    first, second = slopes_at(times, x, middle_ranks(times))
    ranks = rankdata(x - 0.5 * (first + second) * _grid(times))
    if np.ptp(ranks) == 0.0:
        raise NotTestable("values that differ from a straight line", "a straight line")
    n_lags = n - 1 if lags is None else lags
    products = lagged_products(centred(ranks), n_lags)
    r = products[1:] / products[0]
    lag = np.arange(1.0, n_lags + 1.0)
    weights = (n - lag) * (n - lag - 1.0) * (n - lag - 2.0)
    kept = np.abs(r) > SIGNIFICANT / math.sqrt(n)
    factor = 1.0 + 2.0 / (n * (n - 1.0) * (n - 2.0)) * float(np.sum(weights[kept] * r[kept]))
    if factor <= 0.0:
        raise NotTestable(
            "a positive variance after the correction (fewer lags may give one)", f"{factor:.3g}"
        )
    return factor
