"""Whether failures concentrate in a level or in a stretch, asked after every run."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

STRETCH_RUNS: Final = (10.0, 40.0, 160.0)
"""Runs; memories of the stretch within which the rate of failures is learned."""

STRETCH_CARRY: Final = 0.5
"""Share of the numerator's rate that is the stretch's; the rest is the common rate."""


class RateConcentration:
    """E-process for a binary sequence (failed or not) with a level for each run.

    Null hypothesis: failures are exchangeable over the runs, whatever their levels and order. Alternative:
    each level has a rate of its own, or the rate of late differs from the common one (a spell of failures).

    The numerator is an even mixture of predictive laws: a beta-binomial in each level with Jeffreys' prior,
    and for the stretch a rate learned with exponential forgetting over STRETCH_RUNS. The denominator is the
    likelihood under the one rate that fits best, so that the ratio is at most an e-value under every common
    rate (universal inference).

    References
    ----------
    Wasserman, Ramdas & Balakrishnan (2020), Proceedings of the National Academy of Sciences 117. Ramdas, Ruf,
    Larsson & Koolen (2022), International Journal of Approximate Reasoning 141.
    """

    def __init__(self) -> None:
        self._by_level: dict[str, tuple[int, int]] = {}
        self._n = 0
        self._n_failed = 0
        self._log_levels = 0.0
        self._log_stretch = np.zeros(len(STRETCH_RUNS))
        self._recent = np.zeros((2, len(STRETCH_RUNS)))

    def observe(self, level: str, *, failed: bool) -> float:
        """Take the next run; give the log e-value."""
        passed_before, failed_before = self._by_level.get(level, (0, 0))
        self._log_levels += _log_beta_binomial(passed_before, failed_before, failed=failed)
        common = (self._n_failed + 0.5) / (self._n + 1.0)
        recent = (self._recent[1] + common) / (self._recent.sum(axis=0) + 1.0)
        rate = STRETCH_CARRY * recent + (1.0 - STRETCH_CARRY) * common
        self._log_stretch += np.log(rate if failed else 1.0 - rate)
        self._recent *= 1.0 - 1.0 / np.array(STRETCH_RUNS)
        self._recent[int(failed)] += 1.0
        self._by_level[level] = (passed_before + (not failed), failed_before + failed)
        self._n += 1
        self._n_failed += failed
        return self.log_e

    @property
    def log_e_levels(self) -> float:
        """Log e-value of "each level has a rate of its own"."""
        return self._log_levels - self._log_supremum()

    @property
    def log_e_stretch(self) -> float:
        """Log e-value of "the rate of late differs"."""
        log_mean = np.logaddexp.reduce(self._log_stretch) - np.log(len(STRETCH_RUNS))
        return float(log_mean) - self._log_supremum()

    @property
    def log_e(self) -> float:
        """Log e-value after the last run: the mean of the two."""
        return float(np.logaddexp(self.log_e_levels, self.log_e_stretch) - np.log(2.0))

    @property
    def level(self) -> str | None:
        """The level whose rate of failures lies farthest above the common one, in standard errors."""
        if not self._n_failed:
            return None
        rate = self._n_failed / self._n
        excess = {name: (k - rate * (m + k)) / np.sqrt(m + k) for name, (m, k) in self._by_level.items()}
        return max(excess, key=lambda name: excess[name])

    def state(self) -> dict[str, object]:
        """Give the state as plain values."""
        return {
            "by_level": {name: list(counts) for name, counts in self._by_level.items()},
            "log_levels": self._log_levels,
            "log_stretch": self._log_stretch.tolist(),
            "recent": self._recent.tolist(),
        }

    @classmethod
    def from_state(
        cls,
        by_level: dict[str, list[int]],
        log_levels: float,
        log_stretch: list[float],
        recent: list[list[float]],
    ) -> RateConcentration:
        """Continue from a state given by `state`."""
        rates = cls()
        rates._by_level = {name: (counts[0], counts[1]) for name, counts in by_level.items()}
        rates._n = sum(sum(counts) for counts in by_level.values())
        rates._n_failed = sum(counts[1] for counts in by_level.values())
        rates._log_levels, rates._log_stretch = log_levels, np.array(log_stretch)
        rates._recent = np.array(recent)
        return rates

    def _log_supremum(self) -> float:
        """Log likelihood of the sequence under the rate that fits best."""
        n, k = self._n, self._n_failed
        if k in {0, n}:
            return 0.0
        return float(k * np.log(k / n) + (n - k) * np.log1p(-k / n))


def _log_beta_binomial(n_passed: int, n_failed: int, *, failed: bool) -> float:
    """Log predictive probability of the next run under Jeffreys' prior Beta(½, ½)."""
    favourable = n_failed if failed else n_passed
    return float(np.log((favourable + 0.5) / (n_passed + n_failed + 1.0)))
