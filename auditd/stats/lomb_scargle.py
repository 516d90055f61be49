"""Lomb-Scargle periodogram of unevenly spaced values."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred
from auditd.stats._nonuniform_fourier import fourier_sums
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, ascending_times, count, vector

# Frequencies tried for each 1 / duration (common practice, 5 to 10; VanderPlas 2018, section 7.1).
OVERSAMPLING = 5
# Memory: about 500 bytes a frequency (1.3 GB measured at 2.5 million), so at most about 4 GB.
N_FREQUENCIES_MAX = 7_500_000


@dataclass(frozen=True, kw_only=True)
class LombScargle(HypothesisTest):
    """Result of `lomb_scargle`.

    Attributes
    ----------
    period : of the highest peak, in the unit of the times.
    power : of the highest peak, as a share of the variance, in [0, 1]; also `.statistic`.
    frequencies, powers : the whole periodogram, in cycles for each unit of time.
    """

    period: float
    power: float
    frequencies: Floats
    powers: Floats


def lomb_scargle(times: ArrayLike, x: ArrayLike, oversampling: int = OVERSAMPLING) -> LombScargle:
    """Detect one cycle of unknown period in unevenly spaced values.

    Null hypothesis: the values are independent normal. Alternative: one sine wave is added.

    Parameters
    ----------
    times : (n,) ascending times; equal ones are allowed.
    x : (n,) values; their mean is taken off.
    oversampling : frequencies tried for each 1 / duration, from one cycle in the duration to n / 2 of them.

    Returns
    -------
    LombScargle
        `.period`, `.power` of the highest peak, the periodogram, and `.pvalue`: Baluev's upper bound of the
        probability that any frequency reaches that power.

    Raises
    ------
    BadInput : malformed values, times that descend.
    NotTestable : fewer than 8 values, constant values or times, or more than 7.5 million frequencies.

    Assumptions
    -----------
    White noise under the null: autocorrelation, trends and steps raise power at long periods and the
    false-alarm rate with it. Regular gaps give false peaks (aliases); a cycle that is not a sine is found
    less easily. The mean is that of the values, so that with few cycles and gaps the power is a little low.

    References
    ----------
    Lomb, N. R. (1976), Astrophys. Space Sci. 39:447-462. Scargle, J. D. (1982), Astrophys. J. 263:835-853,
    equation 10. Press, W. H. and Rybicki, G. B. (1989), Astrophys. J. 338:277-280 (by transforms). Baluev,
    R. V. (2008), Mon. Not. R. Astron. Soc. 385:1279-1285, equation 6.
    """
    values = vector(x, "x", n_min=8, varying=True)
    n = values.size
    clock = ascending_times(times, n)
    oversampling = count(oversampling, "oversampling", high=1000)
    duration = float(clock[-1]) * n / (n - 1.0)
    n_frequencies = oversampling * n // 2
    if n_frequencies > N_FREQUENCIES_MAX:
        raise NotTestable(
            f"at most {N_FREQUENCIES_MAX} frequencies", f"{n_frequencies}; lower the oversampling"
        )
    phases = clock / (duration * oversampling)
    powers = normalised_powers(phases, centred(values), n_frequencies)[oversampling - 1 :]
    frequencies = np.arange(oversampling, n_frequencies + 1) / (duration * oversampling)
    peak = int(np.argmax(powers))
    power = float(powers[peak])
    return LombScargle(
        statistic=power,
        n=n,
        source="Lomb (1976); Scargle (1982), Astrophys. J. 263:835; p-value: Baluev (2008), MNRAS 385:1279",
        pvalue=baluev_bound(power, float(frequencies[-1]) * float(np.std(clock)), n),
        null="the values are independent normal",
        period=1.0 / float(frequencies[peak]),
        power=power,
        frequencies=frequencies,
        powers=powers,
    )


def normalised_powers(phases: Floats, deviations: Floats, n_frequencies: int) -> Floats:
    """Scargle's periodogram at j = 1 … n_frequencies turns of the phases, as a share of the variance."""
    first = fourier_sums(phases, deviations, n_frequencies)[1:]
    double = fourier_sums(phases, np.ones(phases.size), 2 * n_frequencies)[2::2]
    n = phases.size
    # Scargle's time offset makes sine and cosine orthogonal: it turns the double-angle sum to the real axis.
    size = np.abs(double)
    turn = np.where(size > 1e-9 * n, np.sqrt(double / np.where(size > 0.0, size, 1.0)), 1.0)
    turned = first * np.conj(turn)
    cosines, sines = 0.5 * (n + size), 0.5 * (n - size)
    power = turned.real**2 / cosines
    # Where all times fall on zeros of the sine, it adds nothing.
    power += np.where(sines > 1e-9 * n, turned.imag**2 / np.where(sines > 1e-9 * n, sines, 1.0), 0.0)
    return np.asarray(np.clip(power / float(np.sum(deviations**2)), 0.0, 1.0))


def baluev_bound(power: float, bandwidth: float, n: int) -> float:
    """Baluev's bound for a standard-normalised power, with the bandwidth f_max · sd(times)."""
    if power >= 1.0:
        return 0.0
    rest = math.log1p(-power)
    single = math.exp(0.5 * (n - 3.0) * rest)
    gamma = math.sqrt(2.0 / (n - 1.0)) * math.exp(math.lgamma(0.5 * (n - 1.0)) - math.lgamma(0.5 * (n - 2.0)))
    turns = gamma * math.sqrt(4.0 * math.pi) * bandwidth
    expected = turns * math.exp(0.5 * (n - 4.0) * rest) * math.sqrt(0.5 * (n - 1.0) * power)
    bound = -math.expm1(-expected) + single * math.exp(-expected)
    return min(1.0, max(0.0, bound))
