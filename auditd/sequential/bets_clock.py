"""`clock`: scores follow the time of day or of the week."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import CLOCK_N_PERIODS, CLOCK_PERIOD_S, CLOCK_VARIANCE
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

LEVEL_VARIANCE = 1.0
"""Prior variance of the scores' level, in squared standard deviations of a score."""


class ClockCycle:
    """Bets that a score is N(m, 1), m the cycle that a Bayesian regression has learned from earlier scores.

    The regression has a level, a sine and a cosine of the period; coefficients of the cycle are N(0, v) each,
    the level is N(0, LEVEL_VARIANCE), the residual's variance is 1 − v. It learns from the first run and bets
    once the runs span the stated number of periods. Only the cycle is bet on, neither the level nor the
    residual's variance: scores whose level or spread changed win nothing here without a cycle.

    Parameters
    ----------
    n_periods : periods that the runs must span before it bets.

    References
    ----------
    Gelman et al. (2013), Bayesian Data Analysis, section 14.8 (normal prior, known variance).
    """

    families: tuple[tuple[str, int], ...] = (("clock", len(CLOCK_PERIOD_S) * len(CLOCK_VARIANCE)),)
    has_levels_alone = False
    along = "order"

    def __init__(self, n_periods: float = CLOCK_N_PERIODS) -> None:
        self._n_periods = n_periods
        self._sums = np.zeros((9, len(CLOCK_PERIOD_S)))
        self._span = np.array([np.inf, -np.inf])

    def log_bets(self, block: ScoredBlock) -> FloatArray:
        """Give log L of every grid point, (grid, n), a period after the other."""
        known = np.isfinite(block.times)
        z = np.where(known, block.z, 0.0)
        times = np.where(known, block.times, 0.0)
        earliest = np.minimum.accumulate(np.where(known, times, np.inf))
        latest = np.maximum.accumulate(np.where(known, times, -np.inf))
        earliest, latest = np.minimum(earliest, self._span[0]), np.maximum(latest, self._span[1])
        self._span = np.array([earliest[-1], latest[-1]])
        period = np.array(CLOCK_PERIOD_S)[:, None]
        phase = 2.0 * np.pi * np.mod(times, period) / period
        bets = self._bets_on_cycle(known * np.sin(phase), known * np.cos(phase), known, z)
        bets *= known & (latest - earliest >= self._n_periods * period)
        return np.moveaxis(bets, 0, 1).reshape(-1, z.size)

    def _bets_on_cycle(self, s: FloatArray, c: FloatArray, known: BoolArray, z: FloatArray) -> FloatArray:
        """Bet on the cycle's posterior mean, the level integrated out; (variances, periods, n)."""
        products = np.empty((9, *s.shape))
        products[0], products[1], products[2] = known, s, c
        products[3], products[4], products[5] = s * s, s * c, c * c
        products[6], products[7], products[8] = z, s * z, c * z
        totals = np.cumsum(np.concatenate((self._sums[:, :, None], products), axis=2), axis=2)
        self._sums = totals[:, :, -1].copy()
        n, sum_s, sum_c, ss, sc, cc, sum_z, sz, cz = totals[:, :, :-1]
        v = np.array(CLOCK_VARIANCE)[:, None, None]
        noise = 1.0 - v
        held = n + noise / LEVEL_VARIANCE
        a = ss - sum_s * sum_s / held + noise / v
        b = sc - sum_s * sum_c / held
        d = cc - sum_c * sum_c / held + noise / v
        of_s, of_c = sz - sum_s * sum_z / held, cz - sum_c * sum_z / held
        mean = (s * (d * of_s - b * of_c) + c * (a * of_c - b * of_s)) / (a * d - b * b)
        bets: FloatArray = mean * z - 0.5 * mean * mean
        return bets

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"sums": self._sums, "span": self._span}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._sums, self._span = state["sums"], state["span"]
