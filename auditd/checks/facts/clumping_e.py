"""An e-process for levels that follow each other more than a random order lets them."""

from __future__ import annotations

from auditd.checks.facts.segments import ENOUGH, N_SEGMENT, Segments

LOW_STICKINESS = 0.3
"""Probability, beyond chance, that the next run has the level of the one before: for long mixed stretches."""
HIGH_STICKINESS = 0.9
"""The same for sorted orders."""
LOW_REST, HIGH_REST = 1.0 - LOW_STICKINESS, 1.0 - HIGH_STICKINESS
"""What is left for chance."""
SHARE_MOVED = 0.01
"""Share of the wealth that moves between the bets at each run, so that a change of habit is followed
(fixed share: Herbster & Warmuth 1998, Machine Learning 32, 151-178)."""


class ClumpingE:
    """Wealth of a bettor who says that levels are clumped, against every exchangeable order.

    Null hypothesis: the order of the levels is exchangeable, whatever their counts. Alternative: a level
    tends to follow itself. With q the bettor's probability of a segment of n runs, counts n_1 … n_K, and
    levels named in the order of appearance, e = q · n! / (n_1! … n_K! · K!): no exchangeable law gives the
    segment more than K! n_1! … n_K! / n!, so that e is at most a ratio of q to the truth (Ramdas, Ruf,
    Larsson & Koolen 2022, International Journal of Approximate Reasoning 141, for two levels). Balanced
    and blocked orders lose: they are not what is looked for.
    """

    def __init__(self) -> None:
        self.n = 0
        self.counts: list[int] = []
        self.segments = Segments()
        self._in_segment: list[int] = []
        self._last = -1
        self._low, self._high = 0.25, 0.25

    def observe(self, level: int) -> float:
        """Take the next run's level, numbered from 0 in the order of appearance; return the wealth."""
        counts, segments, n = self.counts, self.segments, self.n
        if segments.n >= N_SEGMENT:
            segments.begin()
            self._low = self._high = 0.5 * segments.wealth
            self._in_segment = [0] * len(counts)
        if level == len(counts):
            counts.append(0)
            self._in_segment.append(0)
            by_chance = 1.0 / (n + 1.0) / len(counts)
        else:
            by_chance = counts[level] / (n + 1.0)
        counts[level] += 1
        self.n = n + 1
        segments.n += 1
        alike = self._in_segment[level] = self._in_segment[level] + 1
        if segments.wealth < ENOUGH:
            same = level == self._last
            ratio = segments.n / alike
            low = self._low * ratio * (LOW_REST * by_chance + (LOW_STICKINESS if same else 0.0))
            high = self._high * ratio * (HIGH_REST * by_chance + (HIGH_STICKINESS if same else 0.0))
            segments.wealth = wealth = low + high
            moved = 0.5 * SHARE_MOVED * wealth
            self._low = (1.0 - SHARE_MOVED) * low + moved
            self._high = (1.0 - SHARE_MOVED) * high + moved
        self._last = level
        return segments.total
