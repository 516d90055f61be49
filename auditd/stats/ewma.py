"""Exponentially weighted moving average chart."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import BadInput
from auditd.stats._results import Estimate
from auditd.stats._validate import Floats, number, vector
from auditd.stats.cusum import number_of_sigmas


@dataclass(frozen=True, kw_only=True)
class Ewma(Estimate):
    """Result of `ewma`.

    Attributes
    ----------
    path : (n,) averages in the values' unit.
    low, high : (n,) the chart's limits.
    alarm_index : index, from 0, of the first average outside of its limits, or None.
    """

    path: Floats
    low: Floats
    high: Floats
    alarm_index: int | None


def ewma(
    x: ArrayLike, target: float, sigma: float, lam: float, limit: float, *, fixed_limits: bool = False
) -> Ewma:
    """Watch a level for small shifts by an exponentially weighted moving average.

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    target : the level in control and the average's start, in the values' unit.
    sigma : their standard deviation in control, above 0.
    lam : weight of the newest value, in (0, 1].
    limit : half-width of the limits in standard deviations of the average.
    fixed_limits : the average's final standard deviation from the first run on, as `ewma_arl` has it, in
        place of its exact one, which starts narrower.

    Returns
    -------
    Ewma
        `.statistic` is the largest deviation from target in standard deviations of the average.

    Raises
    ------
    BadInput : malformed values or parameters out of range.
    NotTestable : no values.

    Assumptions
    -----------
    Independent values with known target and sigma; nearly normal ones only for lam above about 0.2. Positive
    autocorrelation raises the false-alarm rate many-fold.

    References
    ----------
    Roberts, S. W. (1959), Technometrics 1:239-250. Montgomery, D. C., Introduction to Statistical Quality
    Control, section 9.2.
    """
    from scipy.signal import lfilter

    values = vector(x, "x", n_min=1)
    target = number(target, "target")
    sigma = number(sigma, "sigma", above=0.0)
    limit = number(limit, "limit", above=0.0)
    lam = number(lam, "lam", above=0.0, below=1.0, closed=True)
    if lam < 1e-9:
        raise BadInput(f"lam is {lam:g}; a weight from 1e-9 to 1 is expected")
    z = lfilter([lam], [1.0, lam - 1.0], number_of_sigmas(values, target, sigma))
    spread = _standard_deviation(lam, values.size, fixed=fixed_limits)
    outside = np.abs(z) > limit * spread
    return Ewma(
        statistic=float(np.max(np.abs(z) / spread)),
        n=values.size,
        source="Roberts (1959), Technometrics 1:239; Montgomery, Introduction to SQC, section 9.2",
        path=target + sigma * z,
        low=target - limit * sigma * spread,
        high=target + limit * sigma * spread,
        alarm_index=int(np.argmax(outside)) if outside.any() else None,
    )


def _standard_deviation(lam: float, n: int, *, fixed: bool) -> Floats:
    """Of the average after 1 … n values, in units of sigma."""
    final = math.sqrt(lam / (2.0 - lam))
    if fixed or lam == 1.0:
        return np.full(n, final)
    share = -np.expm1(2.0 * math.log1p(-lam) * np.arange(1.0, n + 1.0))
    return np.asarray(final * np.sqrt(share))
