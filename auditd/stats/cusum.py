"""Two-sided tabular CUSUM chart."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._results import Estimate
from auditd.stats._validate import Floats, number, vector


@dataclass(frozen=True, kw_only=True)
class Cusum(Estimate):
    """Result of `cusum`.

    Attributes
    ----------
    path : (n, 2) upper and lower sums, both ≥ 0, in units of sigma; one row a run.
    alarm_index : index, from 0, of the first run with a sum above h, or None.
    alarm_side : "upper", "lower" or None.
    last_before : index of the last run before the change that the alarm implies (where its sum was last
        zero), −1 when it never was, or None without an alarm.
    """

    path: Floats
    alarm_index: int | None
    alarm_side: str | None
    last_before: int | None


def cusum(x: ArrayLike, target: float, sigma: float, k: float, h: float) -> Cusum:
    """Watch a level for small lasting shifts by sums of deviations beyond an allowance.

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    target : the level in control, in the values' unit.
    sigma : their standard deviation in control, above 0.
    k : allowance in units of sigma, usually half of the shift to be found.
    h : decision limit in units of sigma; `cusum_arl` says how often it is passed by chance.

    Returns
    -------
    Cusum
        `.path` goes on after an alarm; `.statistic` is its largest value.

    Raises
    ------
    BadInput : malformed values, sigma ≤ 0, k < 0, h ≤ 0.
    NotTestable : no values.

    Assumptions
    -----------
    Independent normal values with known target and sigma: positive autocorrelation, and a sigma estimated too
    small, raise the false-alarm rate many-fold.

    References
    ----------
    Page, E. S. (1954), Biometrika 41:100-115. Montgomery, D. C., Introduction to Statistical Quality Control,
    section 9.1 (the tabular form).
    """
    values = vector(x, "x", n_min=1)
    target = number(target, "target")
    sigma = number(sigma, "sigma", above=0.0)
    k = number(k, "k", above=0.0, below=1e6, closed=True)
    h = number(h, "h", above=0.0)
    z = number_of_sigmas(values, target, sigma)
    path = np.column_stack((_reflected_sum(z - k), _reflected_sum(-z - k)))
    alarm, side, before = _first_alarm(path, h)
    return Cusum(
        statistic=float(path.max()),
        n=values.size,
        source="Page (1954), Biometrika 41:100; Montgomery, Introduction to SQC, section 9.1",
        path=path,
        alarm_index=alarm,
        alarm_side=side,
        last_before=before,
    )


def number_of_sigmas(values: Floats, target: float, sigma: float) -> Floats:
    """Deviations from the target in units of sigma; raises when they leave double precision's squares."""
    with np.errstate(over="ignore"):
        z = (values - target) / sigma
    return vector(z, "(x - target) / sigma")


def _reflected_sum(steps: Floats) -> Floats:
    """max(0, C_{t−1} + step_t) without a loop: the walk less its lowest point so far."""
    walk = np.cumsum(steps)
    lowest = np.minimum(np.minimum.accumulate(walk), 0.0)
    return np.asarray(walk - lowest)


def _first_alarm(path: Floats, h: float) -> tuple[int | None, str | None, int | None]:
    over = path > h
    hits = over.any(axis=1)
    if not hits.any():
        return None, None, None
    alarm = int(np.argmax(hits))
    column = 0 if over[alarm, 0] else 1
    zeros = np.flatnonzero(path[:alarm, column] == 0.0)
    return alarm, ("upper", "lower")[column], int(zeros[-1]) if zeros.size else -1
