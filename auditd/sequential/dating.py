"""Since when: the most probable first run of a dependence, and the starts that cannot be excluded."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from auditd.sequential.wealth import log_mean

FloatArray = npt.NDArray[np.float64]

N_RUNS_DATED: Final = 20_000
"""Scored runs looked back on; an older start is reported as the first of them."""

COVERAGE: Final = 0.98
"""Posterior mass of the starts that are kept: above the 0.95 promised, since the alarm selects the moment."""

SHIFT_VARIANCE: Final = (0.1, 0.5, 2.0)
"""Prior variances of a shift, in squared standard deviations of a score."""

SPREAD_RATIOS: Final = (0.4, 0.5, 0.63, 0.8, 1.25, 1.6, 2.0, 2.5)
"""Ratios of the standard deviation, evenly weighted."""


def log_weight_of_shift(z: FloatArray) -> FloatArray:
    """Give log marginal likelihood ratios of "scores from u on are N(δ, 1)", δ ~ N(0, τ²), for every u.

    References
    ----------
    Barry & Hartigan (1993), Journal of the American Statistical Association 88, section 3.
    """
    n = np.arange(z.size, 0, -1, dtype=np.float64)
    total = np.cumsum(z[::-1])[::-1]
    tau2 = np.array(SHIFT_VARIANCE)[:, None]
    return log_mean(0.5 * total**2 * tau2 / (1.0 + n * tau2) - 0.5 * np.log1p(n * tau2))


def log_weight_of_spread(z: FloatArray) -> FloatArray:
    """Give log likelihood ratios of "scores from u on are N(0, κ²)", mixed over κ, for every u."""
    n = np.arange(z.size, 0, -1, dtype=np.float64)
    squares = np.cumsum((z * z)[::-1])[::-1]
    kappa = np.array(SPREAD_RATIOS)[:, None]
    return log_mean(0.5 * squares * (1.0 - kappa**-2.0) - n * np.log(kappa))


def log_weight_of_bets(log_l: FloatArray) -> FloatArray:
    """Give log Π_{t >= u} L_t, mixed over the grid, for every u; log_l is (grid, n)."""
    return log_mean(np.cumsum(log_l[:, ::-1], axis=1)[:, ::-1])


def starts_not_excluded(log_weight: FloatArray) -> tuple[int, int, int]:
    """Give the most probable start and the first and last of the starts kept.

    Kept are the most probable starts that together hold COVERAGE of the posterior under an even prior.
    """
    weight = np.exp(log_weight - log_weight.max())
    order = np.argsort(-weight, kind="stable")
    held = np.cumsum(weight[order])
    kept = order[: int(np.searchsorted(held, COVERAGE * held[-1])) + 1]
    return int(order[0]), int(kept.min()), int(kept.max())
