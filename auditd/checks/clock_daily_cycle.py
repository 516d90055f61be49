"""Does the response follow the time of day? By regression on its sine and cosine."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect

DAY_S = 86_400.0
N_PERIODS_MIN = 3.0
"""Two days show no cycle: they cannot tell it from a drift."""


class ClockDailyCycle:
    """Detect a daily cycle in a response by the F ratio of a cosinor regression.

    Null hypothesis: the value does not depend on the time of day. Alternative: it follows a sine of one day.
    Assumptions: no serial dependence; runs span three days or more.
    """

    name: ClassVar[str] = "daily_cycle"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values do not depend on the time of day"
    assumes: ClassVar[str] = "no serial dependence besides; starts are stated; any law, in large samples"
    source: ClassVar[str] = "Nelson, Tong, Lee & Halberg (1979), Chronobiologia 6:305-323 (cosinor)"
    n_min: ClassVar[int] = 30

    def ask(self, view: View) -> Answer:
        """Return the answer with the amplitude, in response units, as effect."""
        from scipy.special import fdtrc

        times = view.times
        if np.isnan(times).any():
            raise NotTestable("a start for every run", "runs without one")
        span = float(times.max() - times.min()) / DAY_S
        if span < N_PERIODS_MIN:
            raise NotTestable(f"runs over {N_PERIODS_MIN:.0f} days", f"{span:.1f} days")
        angle = 2 * np.pi * times / DAY_S
        design = np.column_stack([np.ones(view.n), np.sin(angle), np.cos(angle)])
        if np.linalg.matrix_rank(design) < 3:
            raise NotTestable("runs at several times of day", "one time of day")
        ratio = _f_ratio(design, view.scores)
        return answered(
            self,
            view,
            statistic=ratio,
            pvalue=float(fdtrc(2, view.n - 3, ratio)),
            effect=_amplitude(design, view),
        )


def _f_ratio(design: np.ndarray, y: np.ndarray) -> float:
    fitted, *_ = np.linalg.lstsq(design, y, rcond=None)
    rest = y - design @ fitted
    centred = y - y.mean()
    explained = float(centred @ centred - rest @ rest)
    return max(explained, 0.0) / 2 / (float(rest @ rest) / (len(y) - 3))


def _amplitude(design: np.ndarray, view: View) -> Effect:
    fitted, *_ = np.linalg.lstsq(design, view.values, rcond=None)
    rest = view.values - design @ fitted
    amplitude = float(np.hypot(fitted[1], fitted[2]))
    half = 1.96 * float(np.sqrt(2 * (rest @ rest) / (view.n - 3) / view.n))
    return Effect(
        name="amplitude over the day", value=amplitude, low=max(amplitude - half, 0.0), high=amplitude + half
    )
