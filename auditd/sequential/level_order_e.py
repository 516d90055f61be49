"""Whether a factor's levels come in random order, asked after every run."""

from __future__ import annotations

import math
from typing import Final

import numpy as np

STICKINESS: Final = (0.3, 0.6, 0.9)
"""Probabilities bet on that a run simply repeats the level of the run before it."""


class LevelOrder:
    """E-process for the order of a categorical sequence, such as the cells in which runs are made.

    Null hypothesis: the levels are exchangeable (their order is random). Alternative: a run tends to have the
    level of the run before it (all of A before B). One-sided: balanced, blocked or alternating orders stay
    silent, since they repeat less often than chance would.

    Levels are known only by the order in which they appear: the process looks at which runs share a level.
    The numerator bets κ on a repeat and 1 − κ on the Krichevsky–Trofimov estimate over the levels seen and
    one still unseen, mixed over κ. Under any exchangeable law all patterns with the same level sizes are
    equally likely, so none is likelier than one over their number, n! / (Π c_j! · Π m_i!), c_j being the
    levels' counts and m_i the number of levels of one count. Numerator over that bound never exceeds a
    likelihood ratio, a martingale of mean 1; so it is an e-process under every exchangeable law, whatever the
    number of levels.

    Assumptions: none on the number or shares of levels. A sequence of one level says nothing.

    References
    ----------
    Ramdas, Ruf, Larsson & Koolen (2022), International Journal of Approximate Reasoning 141: testing
    exchangeability. Krichevsky & Trofimov (1981), IEEE Transactions on Information Theory 27. Pitman (1995),
    Probability Theory and Related Fields 102: exchangeable partitions.
    """

    def __init__(self) -> None:
        self._count: dict[str, int] = {}
        self._n_levels_of: dict[int, int] = {}
        self._n = 0
        self._last: str | None = None
        self._log_q = np.zeros(len(STICKINESS))
        self._log_patterns = 0.0

    def observe(self, level: str) -> float:
        """Take the next run's level; give the log e-value."""
        count = self._count.get(level, 0)
        if self._n:
            kappa = np.array(STICKINESS)
            self._log_q += np.log(kappa * (level == self._last) + (1.0 - kappa) * self._estimate(count))
        self._n += 1
        self._log_patterns += math.log(self._n) - math.log(count + 1)
        self._recount(count)
        self._count[level] = count + 1
        self._last = level
        return self.log_e

    def _estimate(self, count: int) -> float:
        """Probability of a level seen `count` times, or not yet seen: (count + ½)/(n + k/2 + ½)."""
        return (count + 0.5) / (self._n + 0.5 * len(self._count) + 0.5)

    def _recount(self, count: int) -> None:
        """Move a level from those of `count` runs to those of one more, keeping Σ log m_i! in step."""
        if count:
            self._log_patterns += math.log(self._n_levels_of[count])
            self._n_levels_of[count] -= 1
        self._n_levels_of[count + 1] = self._n_levels_of.get(count + 1, 0) + 1
        self._log_patterns -= math.log(self._n_levels_of[count + 1])

    @property
    def log_e(self) -> float:
        """Log e-value after the last run."""
        return float(np.logaddexp.reduce(self._log_q)) - math.log(len(STICKINESS)) + self._log_patterns

    def state(self) -> dict[str, object]:
        """Give the state as plain values; `from_state(**state)` continues from it."""
        return {
            "count": dict(self._count),
            "last": self._last,
            "log_q": self._log_q.tolist(),
            "log_patterns": self._log_patterns,
        }

    @classmethod
    def from_state(
        cls, count: dict[str, int], last: str | None, log_q: list[float], log_patterns: float
    ) -> LevelOrder:
        """Continue from a state given by `state`."""
        order = cls()
        order._count, order._last, order._log_q = dict(count), last, np.array(log_q)
        order._n, order._log_patterns = sum(count.values()), log_patterns
        for n_runs in count.values():
            order._n_levels_of[n_runs] = order._n_levels_of.get(n_runs, 0) + 1
        return order
