"""Critical values that hold at every look: a confidence sequence by a normal mixture."""

from __future__ import annotations

import functools
import math

MIXTURE_RUNS = 20.0  # effective runs: scale of the mixture; at most 1.6 fixed widths from 60 to 700 of them
FIRST_LOOK_RUNS = 30.0  # effective runs from which the sequence holds; an earlier start costs width later


def critical(n_effective: float, confidence: float) -> float:
    """Critical value, in standard errors, of the confidence sequence at n_effective runs.

    The martingale (1 + r)^(−1/2)·exp(z²r / (2(1 + r))), r = n_effective / 20, stays below 1/a for ever
    after 30 effective runs with probability 1 − α, where a solves P(|Z| ≥ u₃₀) + a·P(|Z| < u₃₀ / √(1 +
    r₃₀)) = α exactly for Brownian motion.

    References
    ----------
    Robbins (1970), Annals of Mathematical Statistics 41:1397-1409; Robbins & Siegmund (1970), ibid.
    41:1410-1429; Waudby-Smith, Arbour, Sinha, Kennedy & Ramdas (2024), Annals of Statistics 52:2613-2640
    (the asymptotic form).
    """
    return _boundary(max(n_effective, 1e-3) / MIXTURE_RUNS, _crossing_level(confidence))


def _boundary(r: float, level: float) -> float:
    return math.sqrt((1 + 1 / r) * (math.log1p(r) - 2 * math.log(level)))


def _normal(x: float) -> float:
    return 0.5 * math.erfc(-x / math.sqrt(2))


def _crossing(level: float) -> float:
    """Probability that the mixture martingale ever reaches 1/level from the first look on."""
    r = FIRST_LOOK_RUNS / MIXTURE_RUNS
    u = _boundary(r, level)
    return 2 * _normal(-u) + level * (2 * _normal(u / math.sqrt(1 + r)) - 1)


@functools.lru_cache(maxsize=64)
def _crossing_level(confidence: float) -> float:
    low, high = 1e-12, 0.9
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if _crossing(middle) < 1 - confidence else (low, middle)
    return 0.5 * (low + high)
