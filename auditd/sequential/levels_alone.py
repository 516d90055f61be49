"""Wealth of bets that one level alone is affected."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.latest_sum import log_sum_of_latest
from auditd.sequential.levels import Grouping, grown
from auditd.sequential.start_weights import log_start_weight, log_unspent
from auditd.sequential.wealth import LOG_FIRST_START, FamilyRows, grow_wealth

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def log_level_weight(level: IntArray) -> FloatArray:
    """Give log 1/(j(j+1)) for the j-th level to appear; codes count from 0."""
    j = level.astype(np.float64) + 1.0
    weight: FloatArray = -np.log(j) - np.log1p(j)
    return weight


class LevelsAlone:
    """A wealth for each level, its starts counted in its own runs.

    The j-th level to appear has weight 1/(j(j+1)), since the number of levels is not known beforehand; what no
    level has claimed stays unspent, so that the weights always sum to 1 and the sum is an e-process.
    """

    def __init__(self, sizes: list[int]) -> None:
        self._rows = FamilyRows(sizes)
        self.log_wealth = np.zeros((self._rows.n_rows, 0))
        self.latest = np.zeros((len(sizes), 0))
        self._past: tuple[IntArray, FloatArray, FloatArray] = (
            np.zeros(0, dtype=np.int64),
            np.zeros((len(sizes), 0)),
            self.latest,
        )

    def follow(self, log_l: FloatArray, groups: Grouping) -> FloatArray:
        """Give each family's log e-value after each run, (families, n)."""
        self.log_wealth = grown(self.log_wealth, groups.n_levels, LOG_FIRST_START)
        n_seen = np.maximum.accumulate(np.maximum(groups.code, self.latest.shape[1] - 1)) + 1
        self.latest = grown(self.latest, groups.n_levels, -np.inf)
        weighted = self._level_values(log_l, groups) + log_level_weight(groups.code)
        self._past = (groups.code, weighted, self.latest.copy())
        total = np.vstack(
            [
                log_sum_of_latest(groups.code, value, latest)
                for value, latest in zip(weighted, self.latest, strict=True)
            ]
        )
        return np.logaddexp(total, -np.log1p(n_seen))

    def _level_values(self, log_l: FloatArray, groups: Grouping) -> FloatArray:
        """Give, for each run, its own level's log e-values after it, (families, n)."""
        by_level = log_l[:, groups.by_level]
        log_start, unspent = log_start_weight(groups.count + 1), log_unspent(groups.count + 1)
        value = np.empty((self._rows.sizes.size, groups.code.size))
        for first, n_runs, level in zip(groups.first, groups.n_runs, groups.level, strict=True):
            part = slice(first, first + n_runs)
            path = grow_wealth(self.log_wealth[:, level], by_level[:, part], log_start[part])
            self.log_wealth[:, level] = path[:, -1]
            value[:, groups.by_level[part]] = self._rows.log_e(path, unspent[part])
        return value

    def level_log_e(self, family: int, at: int) -> FloatArray:
        """Give each level's own log e-value after run `at` of the block taken last."""
        code, weighted, before = self._past
        latest = before[family].copy()
        # Of repeated positions the last assignment stands.
        latest[code[: at + 1]] = weighted[family, : at + 1]
        evidence: FloatArray = latest - log_level_weight(np.arange(latest.size))
        return evidence
