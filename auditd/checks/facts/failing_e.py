"""E-processes for failures that are concentrated: on levels, or in stretches of the order."""

from __future__ import annotations

import math

PULLS = (2.0, 20.0, 1e9)
"""Runs that the common rate counts for beside a level's own; the last is the common rate alone."""
WINDOWS = (5.0, 20.0, 100.0)
"""Runs over which the recent rate is taken, by exponential weights; the common rate alone is a fourth bet."""
SHARE_MOVED = 0.01
"""Share of the weight that moves between the bets at each run (Herbster & Warmuth 1998)."""


class _Bets:
    """A mixture of forecasts against every exchangeable law of failures.

    Null hypothesis: given the labels, the sequence of failures is exchangeable. With q the mixture's
    probability of n outcomes of which k failed, e = q · n! / (k! (n − k)!): no exchangeable law gives the
    sequence more than k! (n − k)! / n! (Ramdas, Ruf, Larsson & Koolen 2022, International Journal of
    Approximate Reasoning 141). Betting starts after the first failure, which is a stopping time: what
    follows is exchangeable still, and campaigns without failures cost nothing.
    """

    def __init__(self, n_bets: int) -> None:
        self.log_e = 0.0
        self._n = 0
        self._n_failed = 0
        self._weights = [1 / n_bets] * n_bets

    def settle(self, forecasts: list[float], *, failed: bool) -> None:
        """Take one outcome, for which each bet had forecast a probability of failure within (0, 1)."""
        if failed:
            held = [weight * p for weight, p in zip(self._weights, forecasts, strict=True)]
            self._n_failed += 1
        else:
            held = [weight * (1.0 - p) for weight, p in zip(self._weights, forecasts, strict=True)]
        self._n += 1
        total = sum(held)
        alike = self._n_failed if failed else self._n - self._n_failed
        self.log_e += math.log(total * self._n / alike)
        moved = SHARE_MOVED / len(held)
        self._weights = [(1.0 - SHARE_MOVED) * one / total + moved for one in held]


class FailingLevelsE:
    """Bets that levels fail at rates of their own."""

    def __init__(self) -> None:
        self.n: list[int] = []
        self.failed: list[int] = []
        self.bets = _Bets(len(PULLS))

    def observe(self, level: int, *, failed: bool, common: float, betting: bool) -> float:
        """Take a run of a level (numbered in the order of appearance) and return log e.

        `common` is the rate of failure among all earlier runs, within (0, 1); `betting` whether one of
        them failed.
        """
        if level == len(self.n):
            self.n.append(0)
            self.failed.append(0)
        n, k = self.n[level], self.failed[level]
        if betting:
            self.bets.settle([(k + pull * common) / (n + pull) for pull in PULLS], failed=failed)
        self.n[level] = n + 1
        if failed:
            self.failed[level] = k + 1
        return self.bets.log_e


class FailingStretchE:
    """Bets that failures come in stretches of the order."""

    def __init__(self) -> None:
        self.bets = _Bets(len(WINDOWS) + 1)
        self._recent = [0.0] * len(WINDOWS)

    def observe(self, *, failed: bool, common: float, betting: bool) -> float:
        """Take the next run in order and return log e; arguments as for levels."""
        if not betting and not failed:
            return 0.0
        if betting:
            forecasts = [0.95 * rate + 0.05 * common for rate in self._recent]
            self.bets.settle([*forecasts, common], failed=failed)
        self._recent = [
            rate + (failed - rate) / window for rate, window in zip(self._recent, WINDOWS, strict=True)
        ]
        return self.bets.log_e
