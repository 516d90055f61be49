"""An e-process for levels that follow each other more than a random order lets them."""

from __future__ import annotations

import math

STICKINESS = (0.0, 0.3, 0.7, 0.95)
"""Probabilities, beyond chance, that the next run has the level of the one before."""
SHARE_MOVED = 0.01
"""Share of the weight that moves between the bets at each run, so that a change of habit is followed
(fixed share: Herbster & Warmuth 1998, Machine Learning 32, 151-178)."""
N_PSEUDO = 1.0
"""Pseudo-count of a level not seen yet."""


class ClumpingE:
    """Wealth of a bettor who says that levels are clumped, against every exchangeable order.

    Null hypothesis: the order of the levels is exchangeable, whatever their counts. Alternative: a level
    tends to follow itself. With q the bettor's probability of the sequence of n levels, counts n_1 … n_K and
    levels named in the order of appearance, e = q · n! / (n_1! … n_K! · K!): no exchangeable law gives the
    sequence more than K! n_1! … n_K! / n!, so that e is at most a ratio of q to the truth (Ramdas, Ruf,
    Larsson & Koolen 2022, International Journal of Approximate Reasoning 141, for two levels). Balanced
    and blocked orders lose: they are not what is looked for.
    """

    def __init__(self) -> None:
        self.log_e = 0.0
        self.n = 0
        self.counts: list[int] = []
        self._last = -1
        self._weights = [1 / len(STICKINESS)] * len(STICKINESS)

    def observe(self, level: int) -> float:
        """Take the next run's level, numbered from 0 in the order of appearance; return log e."""
        counts = self.counts
        n = self.n
        if level == len(counts):
            counts.append(0)
            by_chance = N_PSEUDO / (n + N_PSEUDO) / len(counts)
        else:
            by_chance = counts[level] / (n + N_PSEUDO)
        same = level == self._last
        held = [
            weight * ((1.0 - s) * by_chance + s if same else (1.0 - s) * by_chance)
            for weight, s in zip(self._weights, STICKINESS, strict=True)
        ]
        if n == 0:
            held = [weight * by_chance for weight in self._weights]
        total = sum(held)
        moved = SHARE_MOVED / len(held)
        self._weights = [(1.0 - SHARE_MOVED) * one / total + moved for one in held]
        counts[level] += 1
        self.n = n + 1
        self._last = level
        self.log_e += math.log(total * self.n / counts[level])
        return self.log_e
