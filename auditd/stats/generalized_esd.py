"""Several outliers in a normal sample, when their number is not known."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, Integers, count, probability, vector
from auditd.stats.grubbs import critical_deviation, deviation_pvalue

SOURCE = "Rosner (1983), Technometrics 25:165-172"
# Rosner (1983), section 4: the level holds well from 25 values on and reasonably from 15.
N_MIN = 15


@dataclass(frozen=True, kw_only=True)
class GeneralizedEsd(HypothesisTest):
    """Result of `generalized_esd`.

    The statistic is the Rᵢ that is furthest beyond chance, and the p-value the smallest level at which any
    outlier would be declared.

    Attributes
    ----------
    outliers : positions from 0 of the values declared outliers, the most deviating first.
    deviations, critical : R₁ … and λ₁ …, one for each step; they end where what is left is constant.
    level : as asked for.
    """

    outliers: tuple[int, ...]
    deviations: tuple[float, ...]
    critical: tuple[float, ...]
    level: float


def generalized_esd(x: ArrayLike, max_outliers: int, level: float = 0.05) -> GeneralizedEsd:
    """Find up to `max_outliers` outliers in normal values, on either side.

    Null hypothesis: all values come from one normal distribution. Alternative: up to `max_outliers` do not.

    Parameters
    ----------
    x : values, shape (n,), at least 15.
    max_outliers : the most that are looked for, at most n/2.
    level : probability of declaring any outlier when there is none.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; `max_outliers` below 1 or above n/2; a level outside
        (0, 1).
    NotTestable : fewer than 15 values, or constant ones.

    Notes
    -----
    Assumes independent normal values. Heavy tails and skewness raise the false alarms without limit as n
    grows. Below 25 values the level is somewhat exceeded.

    References
    ----------
    Rosner (1983), Percentage points for a generalized ESD many-outlier procedure, Technometrics 25:165-172.
    """
    level = probability(level, "level")
    values = vector(x, "x", n_min=N_MIN, varying=True)
    n = values.size
    n_steps = count(max_outliers, "max_outliers", high=n // 2)
    order = np.argsort(values, kind="stable")
    removed, deviations = _remove(values[order], n_steps)
    critical = [critical_deviation(n - i, level / 2) for i in range(len(deviations))]
    n_outliers = max((i + 1 for i, r in enumerate(deviations) if r > critical[i]), default=0)
    pvalues = [deviation_pvalue(r, n - i, 2) for i, r in enumerate(deviations)]
    leading = int(np.argmin(pvalues))
    return GeneralizedEsd(
        statistic=deviations[leading], n=n, source=SOURCE, pvalue=pvalues[leading],
        null="all values come from one normal distribution",
        outliers=tuple(order[removed[:n_outliers]].tolist()), deviations=tuple(deviations),
        critical=tuple(critical), level=level,
    )  # fmt: skip


def _remove(ordered: Floats, n_steps: int) -> tuple[Integers, list[float]]:
    """Take the most deviating value away `n_steps` times: its place in `ordered`, and its deviation.

    Only the n_steps lowest and highest can ever be taken. Sums over the rest are made once, and those over
    the outer ones are cumulated outwards, so that nothing is ever subtracted from a sum.
    """
    n = ordered.size
    core = ordered[n_steps : n - n_steps]
    centre = float(core.mean()) if core.size else float(ordered.mean())
    z = (ordered - centre) / max(centre - float(ordered[0]), float(ordered[-1]) - centre)
    low, high = z[:n_steps][::-1], z[n - n_steps :]
    inner = z[n_steps : n - n_steps]
    sums = [_cumulated(low), _cumulated(high), _cumulated(low * low), _cumulated(high * high)]
    total, square = float(inner.sum()), float(inner @ inner)
    n_low = n_high = n_steps
    removed, deviations = np.empty(n_steps, dtype=np.int64), []
    for i in range(n_steps):
        m = n - i
        if z[n_steps - n_low] == z[n - n_steps + n_high - 1]:
            break
        mean = (total + sums[0][n_low] + sums[1][n_high]) / m
        variance = (square + sums[2][n_low] + sums[3][n_high] - m * mean * mean) / (m - 1)
        below, above = mean - z[n_steps - n_low], z[n - n_steps + n_high - 1] - mean
        deviations.append(float(max(below, above) / variance**0.5))
        if below > above:
            removed[i] = n_steps - n_low
            n_low -= 1
        else:
            removed[i] = n - n_steps + n_high - 1
            n_high -= 1
    return removed, deviations


def _cumulated(values: Floats) -> Floats:
    return np.concatenate(([0.0], np.cumsum(values)))
