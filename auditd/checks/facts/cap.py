"""Many values that stand exactly at one extreme."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import ClassVar

from auditd.checks.facts.condition import counted
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run

N_WINDOW = 2000
"""Runs of a response that are counted together; the next ones start a new count, so that a limit that is
introduced late is seen too."""
N_BETWEEN_LOOKS = 50
"""Runs of a response between two looks at its counts."""
MIN_N_AT_EXTREME = 10
"""Values exactly at the extreme before anything is said ..."""
MIN_SHARE = 0.02
"""... their share of the window ..."""
MIN_RATIO = 10
"""... and how many times the most frequent other value they must be: on a coarse grid, the grid's other
points come back nearly as often."""
MIN_N_DISTINCT = 20
"""Distinct other values in the window; a response with fewer is a rating or a small count, not capped."""


class _Window:
    """Counts of one response's values."""

    def __init__(self, response: str) -> None:
        self.response = response
        self.counts: dict[float, int] = {}
        self.n = 0
        self.largest = -math.inf
        self.smallest = math.inf

    def at_extreme(self) -> tuple[str, float, int] | None:
        """Return (`upper` or `lower`, the value, how many), or None where nothing stands out."""
        if len(self.counts) <= MIN_N_DISTINCT:
            return None
        for side, value in (("upper", self.largest), ("lower", self.smallest)):
            n_at = self.counts[value]
            if n_at < max(MIN_N_AT_EXTREME, MIN_SHARE * self.n):
                continue
            if n_at >= MIN_RATIO * max(n for other, n in self.counts.items() if other != value):
                return side, value, n_at
        return None


class CapFact(Quiet):
    """Find responses with many values exactly at their largest or smallest: a cap, a floor, a time limit.

    Exact counts of equal values; no probability is asked. In a window of 2,000 runs: at least 10 and 2 % of
    the values are at the extreme, ten times as many as at any other value, of which at least 20 occur.
    Such values are censored: the mean of what was kept is not the mean of what would have been.
    A cap that is overshot now and then (values beyond it) is not seen, nor one that differs between cells
    unless it is the largest of them.
    """

    kind: ClassVar[Kind] = "cap"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._windows: dict[str, _Window] = {}
        self._told: dict[str, str] = {}  # key -> the run at which it was told

    def arrived(self, run: Run, _arrival: int) -> Iterable[Finding]:
        """Count the run's values."""
        if not run.completed:
            return ()
        found: list[Finding] = []
        for response, value in run.responses.items():
            window = self._windows.get(response)
            if window is None:
                window = self._windows[response] = _Window(response)
            if value - value != 0.0 or response == "completed":  # not finite
                continue
            window.counts[value] = window.counts.get(value, 0) + 1
            window.n += 1
            window.largest = max(window.largest, value)
            window.smallest = min(window.smallest, value)
            if window.n % N_BETWEEN_LOOKS == 0:
                found += self._look(window, run)
        return found

    def _look(self, window: _Window, run: Run) -> list[Finding]:
        extreme = window.at_extreme()
        n = window.n
        if n >= N_WINDOW:
            self._windows[window.response] = _Window(window.response)
        if extreme is None:
            return []
        side, value, n_at = extreme
        key = f"cap:{window.response}:{side}:{value!r}"
        at = self._told.setdefault(key, run.id)
        what = "largest" if side == "upper" else "smallest"
        message = (
            f"{counted(n_at, 'value')} of {window.response} among the last {counted(n, 'run')} are "
            f"exactly {value:.6g}, the {what} there is: a cap or a limit, so that means are not means"
        )
        return [
            Finding(
                key=key,
                kind="cap",
                message=message,
                response=window.response,
                run=at,
                n=n,
                share=n_at / n,
                n_again=n_at,
            )
        ]
