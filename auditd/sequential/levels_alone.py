"""Wealth of bets that one level alone is affected."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from auditd.sequential.latest_sum import log_sum_of_latest
from auditd.sequential.levels import Grouping, grown
from auditd.sequential.start_weights import log_start_weight, log_unstarted
from auditd.sequential.wealth import FamilyRows, grow_wealth

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def log_level_weight(level: IntArray) -> FloatArray:
    """Give log 1/(j(j+1)) for the j-th level to appear; codes count from 0."""
    j = level.astype(np.float64) + 1.0
    weight: FloatArray = -np.log(j) - np.log1p(j)
    return weight


class LevelsAlone:
    """A wealth for each level of a nuisance.

    The first start's mass is shared among levels by 1/(j(j+1)) for the j-th to appear, since the number of
    levels is not known beforehand. A later start belongs to the level of the run at which it happens, so that
    a late change in one of many levels costs no more than one in one of few. Nothing is spent twice: what no
    level has claimed and what has not started stay as they are, and the sum is an e-process.
    """

    def __init__(self, families: Sequence[tuple[str, int]]) -> None:
        self._rows = FamilyRows(families)
        self._late = self._rows.by_row(self._rows.log_late)
        self.log_wealth = np.zeros((int(self._rows.sizes.sum()), 0))
        self.latest = np.zeros((len(families), 0))
        self._past = (np.zeros(0, dtype=np.int64), self.latest, self.latest)

    def follow(self, log_l: FloatArray, count: IntArray, groups: Grouping) -> FloatArray:
        """Give each family's log e-value after each run, (families, n); count is 1-based over all levels."""
        n_before = self.latest.shape[1]
        self._join(np.arange(n_before, groups.n_levels))
        value = self._level_values(log_l, log_start_weight(count), groups)
        self._past = (groups.code, value, self.latest.copy())
        total = np.vstack(
            [
                log_sum_of_latest(groups.code, own, latest)
                for own, latest in zip(value, self.latest, strict=True)
            ]
        )
        n_seen = np.maximum.accumulate(np.maximum(groups.code, n_before - 1)) + 1
        total = np.logaddexp(total, self._rows.log_first[:, None] - np.log1p(n_seen))
        log_e: FloatArray = np.logaddexp(total, self._rows.log_late + log_unstarted(count))
        return log_e

    def _join(self, new: IntArray) -> None:
        """Give new levels their share of the first start."""
        n_levels = self.latest.shape[1] + new.size
        first = self._rows.by_row(self._rows.log_first)[:, None] + log_level_weight(new)
        self.log_wealth = np.concatenate((self.log_wealth, first), axis=1)
        self.latest = grown(self.latest, n_levels, -np.inf)

    def _level_values(self, log_l: FloatArray, log_start: FloatArray, groups: Grouping) -> FloatArray:
        """Give, for each run, its own level's log wealth after it, (families, n)."""
        by_level, log_start = log_l[:, groups.by_level], log_start[groups.by_level]
        value = np.empty((self._rows.sizes.size, groups.code.size))
        for first, n_runs, level in zip(groups.first, groups.n_runs, groups.level, strict=True):
            part = slice(first, first + n_runs)
            path = grow_wealth(self.log_wealth[:, level], by_level[:, part], log_start[part], self._late)
            self.log_wealth[:, level] = path[:, -1]
            value[:, groups.by_level[part]] = self._rows.log_mean(path)
        return value

    def level_log_wealth(self, family: int, at: int) -> FloatArray:
        """Give each level's log wealth after run `at` of the block taken last; −inf before its first run."""
        code, value, before = self._past
        latest: FloatArray = before[family].copy()
        # Of repeated positions the last assignment stands.
        latest[code[: at + 1]] = value[family, : at + 1]
        return latest
