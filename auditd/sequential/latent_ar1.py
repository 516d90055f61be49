"""Predictions of a score under a latent AR(1) signal seen through noise, by the Kalman filter."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from auditd.sequential.recurrence import solve_recurrence

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

Grid = tuple[tuple[float, ...], tuple[float, ...]]

N_STEPS_TO_STEADY = 1024
"""Runs after which a gain no longer moves in float64, for every grid of this package; held by a test."""


@dataclass(frozen=True, kw_only=True)
class GainTable:
    """Filter quantities by the count of earlier runs; (grid points, N_STEPS_TO_STEADY)."""

    carry: FloatArray
    gain: FloatArray
    half_log_variance: FloatArray
    half_precision: FloatArray


@lru_cache(maxsize=16)
def gain_table(grids: tuple[Grid, ...]) -> GainTable:
    """Tabulate the filter of z = √s·x + √(1−s)·ε, x a stationary AR(1) of unit variance.

    The gains do not depend on the scores, so that predictions are a linear recurrence.

    Parameters
    ----------
    grids : pairs of coefficients and shares; each gives the rows (φ, s), φ varying slowest.

    References
    ----------
    Kalman (1960), Journal of Basic Engineering 82; Durbin & Koopman (2012), Time Series Analysis by State
    Space Methods, section 4.3.
    """
    points = [(phi, share) for phis, shares in grids for phi in phis for share in shares]
    p, s = np.array(points).T
    carry = np.empty((p.size, N_STEPS_TO_STEADY))
    gain, variance = np.empty_like(carry), np.empty_like(carry)
    state_variance = s.copy()
    for step in range(N_STEPS_TO_STEADY):
        variance[:, step] = state_variance + (1.0 - s)
        share_of_innovation = state_variance / variance[:, step]
        gain[:, step] = p * share_of_innovation
        carry[:, step] = p * (1.0 - share_of_innovation)
        state_variance = p * p * (1.0 - share_of_innovation) * state_variance + (1.0 - p * p) * s
    return GainTable(
        carry=carry, gain=gain, half_log_variance=0.5 * np.log(variance), half_precision=0.5 / variance
    )


def log_bets(
    table: GainTable, z: FloatArray, count: IntArray, first: IntArray, state: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Give log L = log f(z_t | past) − log φ(z_t) for segments that each continue their own signal.

    Parameters
    ----------
    table : filter quantities of G grid points.
    z : (n,) scores, segment after segment.
    count : (n,) earlier runs of the segment's signal, from the beginning of the epoch.
    first : (k,) positions at which the segments begin.
    state : (G, k) predicted means at those positions.

    Returns
    -------
    log_l : (G, n)
    state : (G, k), predicted means for the next run of each segment.
    """
    steady = bool(count.min() >= N_STEPS_TO_STEADY - 1)
    at: IntArray | slice = slice(N_STEPS_TO_STEADY - 1, None)
    if not steady:
        at = np.minimum(count, N_STEPS_TO_STEADY - 1)
    carry = np.broadcast_to(table.carry[:, at], (table.carry.shape[0], z.size))
    fed = table.gain[:, at] * z
    coefficient, term = np.empty_like(fed), np.empty_like(fed)
    coefficient[:, 1:], term[:, 1:] = carry[:, :-1], fed[:, :-1]
    coefficient[:, first], term[:, first] = 0.0, state
    mean = solve_recurrence(coefficient, term)
    last = np.append(first[1:], z.size) - 1
    next_state = carry[:, last] * mean[:, last] + fed[:, last]
    log_l = z - mean
    log_l *= log_l
    log_l *= -table.half_precision[:, at]
    log_l += 0.5 * z * z
    log_l -= table.half_log_variance[:, at]
    return log_l, next_state
