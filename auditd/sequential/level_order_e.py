"""Whether a factor's levels come in random order, asked after every run."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

STICKINESS: Final = (0.3, 0.6, 0.9)
"""Probabilities bet on that a run simply repeats the level of the run before it."""


class LevelOrder:
    """E-process for the order of a categorical sequence, such as the cells in which runs are made.

    Null hypothesis: the levels are exchangeable (their order is random). Alternative: a run tends to have the
    level of the run before it (all of A before B). One-sided: balanced, blocked or alternating orders stay
    silent, since they repeat less often than chance would.

    The numerator is q(x_t | past) = κ·1[x_t = x_{t−1}] + (1 − κ)·KT(x_t), mixed over κ, with the
    Krichevsky–Trofimov estimator over the levels seen and one still unseen; the denominator is the likelihood
    of the sequence under the independent law that fits it best. Their ratio is at most an e-value under every
    independent and identical law, hence under exchangeability of a sequence that may be prolonged at will.

    Assumptions: new levels may appear at any time; each costs the numerator about ½·log t.

    References
    ----------
    Wasserman, Ramdas & Balakrishnan (2020), Proceedings of the National Academy of Sciences 117: universal
    inference. Ramdas, Ruf, Larsson & Koolen (2022), International Journal of Approximate Reasoning 141:
    testing exchangeability. Krichevsky & Trofimov (1981), IEEE Transactions on Information Theory 27.
    """

    def __init__(self) -> None:
        self._count: dict[str, int] = {}
        self._n = 0
        self._last: str | None = None
        self._log_q = np.zeros(len(STICKINESS))
        self._sum_count_log_count = 0.0

    def observe(self, level: str) -> float:
        """Take the next run's level; give the log e-value."""
        kappa = np.array(STICKINESS)
        count = self._count.get(level, 0)
        estimate = self._estimate(count)
        self._log_q += (
            np.log(kappa * (level == self._last) + (1.0 - kappa) * estimate) if self._n else np.log(estimate)
        )
        self._sum_count_log_count += _x_log_x(count + 1) - _x_log_x(count)
        self._count[level] = count + 1
        self._n += 1
        self._last = level
        return self.log_e

    def _estimate(self, count: int) -> float:
        """Probability of a level seen `count` times, or not yet seen: (count + ½)/(n + k/2 + ½)."""
        return (count + 0.5) / (self._n + 0.5 * len(self._count) + 0.5)

    @property
    def log_e(self) -> float:
        """Log e-value after the last run."""
        log_supremum = self._sum_count_log_count - _x_log_x(self._n)
        return float(np.logaddexp.reduce(self._log_q) - np.log(len(STICKINESS)) - log_supremum)

    def state(self) -> dict[str, object]:
        """Give the state as plain values."""
        return {"count": dict(self._count), "last": self._last, "log_q": self._log_q.tolist()}

    @classmethod
    def from_state(cls, count: dict[str, int], last: str | None, log_q: list[float]) -> LevelOrder:
        """Continue from a state given by `state`."""
        order = cls()
        order._count, order._last, order._log_q = dict(count), last, np.array(log_q)
        order._n = sum(count.values())
        order._sum_count_log_count = sum(_x_log_x(n) for n in count.values())
        return order


def _x_log_x(n: int) -> float:
    return n * float(np.log(n)) if n else 0.0
