"""`clock`: scores follow the time of day or of the week."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.grids import CLOCK_N_PERIODS, CLOCK_PERIOD_S, CLOCK_VARIANCE
from auditd.sequential.scored_block import ScoredBlock, State

FloatArray = npt.NDArray[np.float64]


class ClockCycle:
    """Bets by Bayesian regression on the sine and cosine of a period.

    Coefficients are N(0, v) each and the residual's variance is 1 − v. It learns from the first run and bets
    once the runs span CLOCK_N_PERIODS periods.

    References
    ----------
    Gelman et al. (2013), Bayesian Data Analysis, section 14.8 (normal prior, known variance).
    """

    families: tuple[tuple[str, int], ...] = (("clock", len(CLOCK_PERIOD_S) * len(CLOCK_VARIANCE)),)
    has_levels_alone = False
    along = "order"

    def __init__(self) -> None:
        self._sums = np.zeros((5, len(CLOCK_PERIOD_S)))
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
        parts = []
        for at, period_s in enumerate(CLOCK_PERIOD_S):
            phase = 2.0 * np.pi * np.mod(times, period_s) / period_s
            x = np.where(known, np.vstack((np.sin(phase), np.cos(phase))), 0.0)
            bets = self._one_period(at, x, z)
            bets[:, ~(known & (latest - earliest >= CLOCK_N_PERIODS * period_s))] = 0.0
            parts.append(bets)
        return np.concatenate(parts)

    def _one_period(self, at: int, x: FloatArray, z: FloatArray) -> FloatArray:
        """Predict each score from those before it by the posterior of two coefficients."""
        s, c = x
        products = np.vstack((s * s, s * c, c * c, s * z, c * z))
        totals = np.cumsum(np.concatenate((self._sums[:, at : at + 1], products), axis=1), axis=1)
        self._sums[:, at] = totals[:, -1]
        ss, sc, cc, sz, cz = totals[:, :-1]
        v = np.array(CLOCK_VARIANCE)[:, None]
        noise = 1.0 - v
        a, b, d = ss + noise / v, sc, cc + noise / v
        determinant = a * d - b * b
        mean = (s * (d * sz - b * cz) + c * (a * cz - b * sz)) / determinant
        variance = noise * (1.0 + (s * s * d - 2.0 * s * c * b + c * c * a) / determinant)
        log_l: FloatArray = 0.5 * z * z - 0.5 * np.log(variance) - (z - mean) ** 2 / (2.0 * variance)
        return log_l

    def state(self) -> State:
        """Give the state as named arrays."""
        return {"sums": self._sums, "span": self._span}

    def restore(self, state: State) -> None:
        """Take a state given by `state`."""
        self._sums, self._span = state["sums"], state["span"]
