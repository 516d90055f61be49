"""Fisher's test of a hidden cycle."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import vector

# The alternating series loses digits as its terms grow; where one exceeds e^18 the p-value is 1 to 1e-7.
LARGEST_LOG_TERM = 18.0


@dataclass(frozen=True, kw_only=True)
class FisherG(HypothesisTest):
    """Result of `fisher_g`: also the peak's Fourier index, its period in runs, and the ordinates counted."""

    index: int
    period: float
    n_ordinates: int


def fisher_g(x: ArrayLike) -> FisherG:
    """Detect one cycle of unknown period in evenly spaced values by the largest share of the periodogram.

    Null hypothesis: the values are independent normal. Alternative: one periodic component is added.

    Parameters
    ----------
    x : (n,) values in the order of the runs, evenly spaced.

    Returns
    -------
    FisherG
        `.statistic` g in (0, 1], the largest of the m = ⌊(n − 1) / 2⌋ ordinates over their sum (frequency
        zero and, for even n, one half are left out); exact `.pvalue`; `.index` j of the peak,
        whose `.period` is n / j runs.

    Raises
    ------
    BadInput : malformed values.
    NotTestable : fewer than 5 values, constant ones, or ones that only alternate.

    Assumptions
    -----------
    White noise under the null: any autocorrelation or trend concentrates the spectrum and raises the
    false-alarm rate strongly. A period between two Fourier frequencies is found less easily.

    References
    ----------
    Fisher, R. A. (1929), Proc. R. Soc. A 125:54-59. Brockwell, P. J. and Davis, R. A. (1991), Time Series:
    Theory and Methods, section 10.2.
    """
    from scipy.fft import rfft

    values = vector(x, "x", n_min=5, varying=True)
    n = values.size
    m = (n - 1) // 2
    spectrum = rfft(centred(values))[1 : m + 1]
    ordinates = spectrum.real**2 + spectrum.imag**2
    total = float(ordinates.sum())
    check_power(total, n)
    peak = int(np.argmax(ordinates))
    g = float(ordinates[peak]) / total
    return FisherG(
        statistic=g,
        n=n,
        source="Fisher (1929), Proc. R. Soc. A 125:54",
        pvalue=exceedance(g, m),
        null="the values are independent normal",
        index=peak + 1,
        period=n / (peak + 1),
        n_ordinates=m,
    )


def check_power(total: float, n: int) -> None:
    """Raise when nothing but rounding is left between frequency zero and one half."""
    if total <= 1e-24 * n:
        raise NotTestable("values that vary other than by turns", "an alternating series")


def exceedance(g: float, m: int) -> float:
    """P(largest share of m ≥ g) under the null, by Fisher's alternating series."""
    if g * m <= 1.0:
        return 1.0
    total, sign = 0.0, 1.0
    for j in range(1, m + 1):
        left = 1.0 - j * g
        if left <= 0.0:
            break
        log_term = math.lgamma(m + 1.0) - math.lgamma(j + 1.0) - math.lgamma(m - j + 1.0)
        log_term += (m - 1.0) * math.log1p(-j * g)
        if log_term > LARGEST_LOG_TERM:
            return 1.0
        total += sign * math.exp(log_term)
        sign = -sign
        if log_term < -45.0:
            break
    return min(1.0, max(0.0, total))
