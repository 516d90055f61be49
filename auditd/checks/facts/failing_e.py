"""E-processes for failures that are concentrated: on levels, or in stretches of the order.

Null hypothesis: given the labels, the sequence of failures is exchangeable. With q the bettor's probability
of a segment of n outcomes of which k failed, e = q · n! / (k! (n − k)!): no exchangeable law gives the
segment more than k! (n − k)! / n! (Ramdas, Ruf, Larsson & Koolen 2022, International Journal of Approximate
Reasoning 141). Betting starts after the first failure, which is a stopping time: what follows is
exchangeable still, and campaigns without failures cost nothing.
"""

from __future__ import annotations

from auditd.checks.facts.segments import ENOUGH, N_SEGMENT, Segments

PULL = 5.0
"""Runs that the common rate of failure counts for beside a level's own."""
SHORT = 1 / 6
"""Weight of the last run in the recent rate, for spells of some runs ..."""
LONG = 1 / 40
"""... and for those of some dozens."""
TRUST = 0.95
"""Share of the recent rate in a forecast; the rest is the common rate, so that no forecast is 0 or 1."""
SHARE_MOVED = 0.01
"""Share of the wealth that moves between the bets at each run (Herbster & Warmuth 1998, Mach. Learn. 32)."""


class Outcomes:
    """The failures so far, and in the segment that is bet on: the same for all bettors."""

    __slots__ = ("_alike", "betting", "common", "n", "n_failed", "opens", "ratio")

    def __init__(self) -> None:
        self.n = 0
        self.n_failed = 0
        self.betting = False
        self.opens = False  # whether the run begins a segment
        self.common = 0.5
        self.ratio = 1.0
        self._alike = [0, 0]

    def take(self, *, failed: bool) -> None:
        """Enter an outcome before the bettors settle it: `common` is the rate among the earlier ones."""
        self.common = (self.n_failed + 0.5) / (self.n + 1.0)
        self.betting = self.n_failed > 0
        self.n += 1
        self.n_failed += failed
        if not self.betting:
            return
        alike = self._alike
        self.opens = alike[0] + alike[1] >= N_SEGMENT
        if self.opens:
            alike[0] = alike[1] = 0
        alike[failed] += 1
        self.ratio = (alike[0] + alike[1]) / alike[failed]


class FailingLevelsE:
    """Wealth of a bettor who says that levels fail at rates of their own."""

    def __init__(self) -> None:
        self.n: list[int] = []
        self.failed: list[int] = []
        self.segments = Segments()
        self._own = self._common = 0.25

    def observe(self, level: int, outcomes: Outcomes, *, failed: bool) -> float:
        """Take a run of a level, numbered from 0 in the order of appearance; return the wealth."""
        if level == len(self.n):
            self.n.append(0)
            self.failed.append(0)
        n, k, segments = self.n[level], self.failed[level], self.segments
        self.n[level] = n + 1
        self.failed[level] = k + failed
        if outcomes.opens:
            segments.begin()
            self._own = self._common = 0.5 * segments.wealth
        if outcomes.betting and segments.wealth < ENOUGH:
            common = outcomes.common
            forecast = (k + PULL * common) / (n + PULL)
            own = self._own * outcomes.ratio * (forecast if failed else 1.0 - forecast)
            rest = self._common * outcomes.ratio * (common if failed else 1.0 - common)
            segments.wealth = wealth = own + rest
            moved = 0.5 * SHARE_MOVED * wealth
            self._own = (1.0 - SHARE_MOVED) * own + moved
            self._common = (1.0 - SHARE_MOVED) * rest + moved
        return segments.total


class FailingStretchE:
    """Wealth of a bettor who says that failures come in stretches of the order."""

    def __init__(self) -> None:
        self.segments = Segments()
        self._rates = (0.0, 0.0)
        self._wealth = (0.5 / 3, 0.5 / 3, 0.5 / 3)

    def observe(self, outcomes: Outcomes, *, failed: bool) -> float:
        """Take the next run in order; return the wealth."""
        segments = self.segments
        short, long = self._rates
        if outcomes.opens:
            segments.begin()
            self._wealth = (segments.wealth / 3,) * 3
        if outcomes.betting and segments.wealth < ENOUGH:
            common = outcomes.common
            p, q = TRUST * short + (1 - TRUST) * common, TRUST * long + (1 - TRUST) * common
            ratio = outcomes.ratio
            a, b, c = self._wealth
            a *= ratio * (p if failed else 1.0 - p)
            b *= ratio * (q if failed else 1.0 - q)
            c *= ratio * (common if failed else 1.0 - common)
            segments.wealth = wealth = a + b + c
            moved, kept = SHARE_MOVED * wealth / 3, 1.0 - SHARE_MOVED
            self._wealth = (kept * a + moved, kept * b + moved, kept * c + moved)
        self._rates = (short + (failed - short) * SHORT, long + (failed - long) * LONG)
        return segments.total
