"""Does the response follow the time of day? By regression on its sine and cosine, days apart."""

from __future__ import annotations

from typing import ClassVar, NamedTuple

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.view import View, segments
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints

DAY_S = 86_400.0
N_PERIODS_MIN = 3.0
"""Days that runs must span: two days cannot tell a cycle from a drift."""
N_DAYS_CLUSTERED = 12
"""Days from which each day is one observation of the cycle, so that what lasts within a day is allowed for;
below, the variance of single runs is used (common practice: clusters of ten and more)."""


class _Cycle(NamedTuple):
    """The fitted sine and cosine, their covariance, and its degrees of freedom."""

    coefficients: Floats
    covariance: Floats
    df: int


class ClockDailyCycle:
    """Detect a daily cycle in a response by a cosinor regression with a level for each day.

    Null hypothesis: the value does not depend on the time of day. Alternative: it follows a sine of one day;
    within levels: on one of them, by the smallest p-value times the number of levels (Bonferroni).
    Assumptions: days are alike and independent of each other, each at its own level; below 12 days: no serial
    dependence at all. Runs must span three days.
    """

    name: ClassVar[str] = "daily_cycle"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values do not depend on the time of day"
    assumes: ClassVar[str] = "starts are stated; days independent of each other; any law, in large samples"
    source: ClassVar[str] = (
        "Nelson, Tong, Lee & Halberg (1979), Chronobiologia 6:305-323 (cosinor); Liang & Zeger (1986), "
        "Biometrika 73:13-22 (days as clusters)"
    )
    n_min: ClassVar[int] = 30
    needs_order: ClassVar[bool] = False
    tiny: ClassVar[float] = 0.1
    unit: ClassVar[Unit] = "response"

    def ask(self, view: View) -> Answer:
        """Return the answer with the amplitude, in response units, as effect."""
        from scipy.special import fdtrc

        if np.isnan(view.times).any():
            raise NotTestable("a start for every run", "runs without one")
        parts = [slice(0, view.n)] if view.groups is None else segments(view.groups)
        asked = [part for part in parts if view.n == part.stop - part.start or _can_ask(view.times[part])]
        if not asked:
            raise NotTestable(f"{self.n_min} runs of a level over {N_PERIODS_MIN:.0f} days", "fewer")
        found = [_ratio(_cycle(view.times[part], view.scores[part])) for part in asked]
        pvalues = [float(fdtrc(2, df, ratio)) for ratio, df in found]
        most = int(np.argmin(pvalues))
        part = asked[most]
        on = "" if view.groups is None else f" on {view.levels[int(view.groups[part.start])]}"
        return answered(
            self,
            view,
            statistic=found[most][0],
            pvalue=min(1.0, len(asked) * pvalues[most]),
            effect=_amplitude(_cycle(view.times[part], view.values[part]), on),
            n=sum(one.stop - one.start for one in asked),
        )


def _can_ask(times: Floats) -> bool:
    return len(times) >= ClockDailyCycle.n_min and float(np.ptp(times)) >= N_PERIODS_MIN * DAY_S


def _cycle(times: Floats, y: Floats) -> _Cycle:
    """Return the sine and cosine of the day, each day's own level taken off."""
    span = float(np.ptp(times)) / DAY_S
    if span < N_PERIODS_MIN:
        raise NotTestable(f"runs over {N_PERIODS_MIN:.0f} days", f"{span:.1f} days")
    day = np.unique(((times - times.min()) // DAY_S).astype(np.int64), return_inverse=True)[1]
    angle = 2 * np.pi * (times % DAY_S) / DAY_S
    design = np.column_stack([_less_daily_mean(np.sin(angle), day), _less_daily_mean(np.cos(angle), day)])
    less = _less_daily_mean(y, day)
    bread = design.T @ design
    n_days, df = int(day.max()) + 1, len(y) - int(day.max()) - 3
    if df < 1 or np.linalg.cond(bread) > 1e8 or np.trace(bread) < 1e-6 * len(y):
        raise NotTestable("runs at several times of a day", "one time of each day")
    inverse = np.linalg.inv(bread)
    coefficients = inverse @ (design.T @ less)
    rest = less - design @ coefficients
    if n_days < N_DAYS_CLUSTERED:
        return _Cycle(coefficients, inverse * float(rest @ rest) / df, df)
    of_day = np.column_stack([np.bincount(day, design[:, k] * rest) for k in (0, 1)])
    covariance = inverse @ (of_day.T @ of_day) @ inverse * n_days / (n_days - 2)
    return _Cycle(coefficients, covariance, n_days - 2)


def _less_daily_mean(x: Floats, day: Ints) -> Floats:
    return np.asarray(x - (np.bincount(day, x) / np.bincount(day))[day])


def _ratio(cycle: _Cycle) -> tuple[float, int]:
    """Return the F ratio with 2 and df degrees of freedom."""
    if np.linalg.cond(cycle.covariance) > 1e12:
        raise NotTestable("residuals that vary from day to day", "none that do")
    square = float(cycle.coefficients @ np.linalg.solve(cycle.covariance, cycle.coefficients))
    return square / 2, cycle.df


def _amplitude(cycle: _Cycle, on: str) -> Effect:
    amplitude = float(np.hypot(cycle.coefficients[0], cycle.coefficients[1]))
    along = cycle.coefficients / amplitude if amplitude > 0 else np.array([1.0, 0.0])
    half = Z * max(float(along @ cycle.covariance @ along), 0.0) ** 0.5
    return Effect(
        name=f"amplitude over the day{on}",
        value=amplitude,
        low=max(amplitude - half, 0.0),
        high=amplitude + half,
    )
