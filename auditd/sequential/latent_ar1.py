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


TRUST_ROUNDED = 1e-13
"""Trust nearer to 1 than this is 1: below what a log e-value can show."""


@dataclass(frozen=True, kw_only=True)
class GainTable:
    """Filter quantities by the count of earlier runs; (grid points, N_STEPS_TO_STEADY)."""

    carry: FloatArray
    gain: FloatArray
    variance: FloatArray


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
    return GainTable(carry=carry, gain=gain, variance=variance)


@dataclass(frozen=True, kw_only=True)
class SignalState:
    """What is known of k signals before their next run; (grid points, k) each.

    Attributes
    ----------
    mean : predicted means.
    trust : exponential mean of the reliability of the scores that the prediction rests on.
    """

    mean: FloatArray
    trust: FloatArray


def log_bets(
    table: GainTable,
    z: FloatArray,
    reliability: FloatArray,
    count: IntArray,
    first: IntArray,
    state: SignalState,
) -> tuple[FloatArray, SignalState]:
    """Give log L = log f(z_t | past) − log φ(z_t) for segments that each continue their own signal.

    A score of reliability ρ (its squared correlation with the score that an endless reference would give)
    shows √ρ of the signal, and feeds √ρ of itself; what a prediction explains shrinks by ρ and by the
    trust in the scores it rests on. This approximates the filter with varying gains, and it is predictable,
    which is all that validity needs.

    Parameters
    ----------
    table : filter quantities of G grid points.
    z : (n,) scores, segment after segment.
    reliability : (n,) in (0, 1].
    count : (n,) earlier runs of the segment's signal, from the beginning of the epoch.
    first : (k,) positions at which the segments begin.
    state : of the k signals.

    Returns
    -------
    log_l : (G, n)
    state : of the k signals before their next runs.
    """
    at: IntArray | slice = slice(N_STEPS_TO_STEADY - 1, None)
    if count.min() < N_STEPS_TO_STEADY - 1:
        at = np.minimum(count, N_STEPS_TO_STEADY - 1)
    carry = table.carry[:, at]
    if carry.shape[1] != z.size:
        carry = np.broadcast_to(carry, (carry.shape[0], z.size))
    root = np.sqrt(reliability)
    mean, next_mean = _predict(carry, table.gain[:, at] * (root * z), first, state.mean)
    explained = 1.0 - table.variance[:, at]
    if reliability.min() < 1.0 or (state.trust < 1.0).any():
        trust, next_trust = _predict(carry, (1.0 - carry) * reliability, first, state.trust)
        next_trust[next_trust > 1.0 - TRUST_ROUNDED] = 1.0
        explained = explained * trust * reliability
        mean *= root
    else:
        next_trust = state.trust
    variance = 1.0 - explained
    mean -= z
    mean *= mean
    mean /= -2.0 * variance
    mean += 0.5 * z * z
    mean -= 0.5 * np.log(variance)
    return mean, SignalState(mean=next_mean, trust=next_trust)


def _predict(
    carry: FloatArray, fed: FloatArray, first: IntArray, state: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Follow a_{t+1} = carry_t·a_t + fed_t in each segment, from its state; give all a and the next ones."""
    if fed.shape[1] == 1:
        return state.copy(), carry * state + fed
    coefficient, term = np.empty_like(fed), np.empty_like(fed)
    coefficient[:, 1:], term[:, 1:] = carry[:, :-1], fed[:, :-1]
    coefficient[:, first], term[:, first] = 0.0, state
    followed = solve_recurrence(coefficient, term)
    last = np.append(first[1:], fed.shape[1]) - 1
    return followed, carry[:, last] * followed[:, last] + fed[:, last]
