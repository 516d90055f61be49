"""Scores and labels of an epoch's newest runs: for parents' scores and for dating an alarm."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.dating import N_RUNS_DATED
from auditd.sequential.latest_rows import LatestRows
from auditd.sequential.scored_block import ScoredBlock

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_RUNS_A_PART = 2048
"""The most runs that are taken before an alarm among them is described."""
N_RUNS_KEPT = N_RUNS_DATED + N_RUNS_A_PART
"""Scored runs kept: those that an alarm looks back on, from any run of the part that was taken last."""


class History:
    """Columns of an epoch: rows by the number of a scored run, or of any run where said.

    Only the newest scored runs are kept; where runs state parents, which may lie far back, the scores of all
    runs are.

    Attributes
    ----------
    z, reliability : scores of runs, by the number of the run; NaN and 0 where not scored.
    index : number of the run of each scored run.
    times : times of the scored runs, NaN where unknown.
    """

    def __init__(self, nuisances: tuple[str, ...], *, has_parents: bool) -> None:
        self._has_parents = has_parents
        self.z = LatestRows(np.float64)
        self.reliability = LatestRows(np.float64)
        self.index = LatestRows(np.int64)
        self.times = LatestRows(np.float64)
        self._parent_z = LatestRows(np.float64)
        self._parent_reliability = LatestRows(np.float64)
        self._codes = {name: LatestRows(np.int32) for name in nuisances}
        self._n_scored = 0

    def codes(self, nuisance: str) -> LatestRows[np.int32]:
        """Level codes of the scored runs."""
        return self._codes[nuisance]

    def parent_scores(self, rows: IntArray) -> tuple[FloatArray, FloatArray]:
        """Scores and reliabilities of the parents of scored runs, NaN and 0 where there is none."""
        if not self._has_parents:
            return np.full(rows.size, np.nan), np.zeros(rows.size)
        return self._parent_z[rows], self._parent_reliability[rows]

    def add_scores(self, z: FloatArray, reliability: FloatArray) -> None:
        """Append the scores of all runs of a block."""
        self.z.extend(z)
        self.reliability.extend(reliability)

    def add_scored(self, index: IntArray, scored: ScoredBlock) -> None:
        """Append what is known of a block's scored runs, and forget what is too old to be looked at."""
        self.index.extend(index)
        self.times.extend(scored.times)
        if self._has_parents:
            self._parent_z.extend(scored.parent_z)
            self._parent_reliability.extend(scored.parent_reliability)
        for name, column in self._codes.items():
            column.extend(scored.groups[name].code)
        self._n_scored += index.size
        self._forget_old()

    def forget_scored(self) -> None:
        """Drop what dating looks at; the scores of all runs stay, for parents."""
        self._n_scored = 0
        for column in self._of_scored():
            column.clear()

    def _forget_old(self) -> None:
        oldest = self._n_scored - N_RUNS_KEPT
        if oldest <= self.index.start:
            return
        if not self._has_parents:
            first_run = int(self.index[oldest])
            self.z.forget_before(first_run)
            self.reliability.forget_before(first_run)
        for column in self._of_scored():
            column.forget_before(oldest)

    def _of_scored(self) -> tuple[LatestRows[np.float64] | LatestRows[np.int64] | LatestRows[np.int32], ...]:
        parents = (self._parent_z, self._parent_reliability) if self._has_parents else ()
        return (self.index, self.times, *parents, *self._codes.values())
