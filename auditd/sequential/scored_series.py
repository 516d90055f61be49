"""The scored runs of an epoch: makes blocks that can be bet on, and remembers what dating needs."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.history import History
from auditd.sequential.levels import Grouping, LevelCodes, group
from auditd.sequential.options import Options
from auditd.sequential.run_block import RunBlock
from auditd.sequential.scored_block import ScoredBlock
from auditd.sequential.scorer import Scores

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


class ScoredSeries:
    """Scored runs so far.

    Attributes
    ----------
    history : their columns.
    levels : levels of each nuisance, in order of appearance among scored runs.
    n_runs, n_scored : runs taken, and scored ones.
    """

    def __init__(self, options: Options) -> None:
        self._has_parents = options.has_parents
        self.history = History(options.nuisances, has_parents=options.has_parents)
        self.levels = {name: LevelCodes() for name in options.nuisances}
        self._n_in_level = {name: np.zeros(0, dtype=np.int64) for name in options.nuisances}
        self.n_runs = 0
        self.n_scored = 0

    def take(self, block: RunBlock, scores: Scores, part: slice) -> tuple[IntArray, ScoredBlock]:
        """Take part of a block; give the positions of its scored runs, and those runs."""
        z = scores.z[part]
        at = np.flatnonzero(np.isfinite(z))
        index = self.n_runs + at
        self.history.add_scores(z, scores.reliability[part])
        self.n_runs += z.size
        at_block = at + part.start
        groups = {name: self._group(name, block, at_block) for name in self.levels}
        parent_z, parent_reliability = self._parents(block, at_block, index)
        scored = ScoredBlock(
            z=z[at],
            reliability=scores.reliability[at_block],
            count=self.n_scored + 1 + np.arange(at.size),
            times=np.full(at.size, np.nan) if block.times is None else block.times[at_block],
            parent_z=parent_z,
            parent_reliability=parent_reliability,
            groups=groups,
        )
        self.n_scored += at.size
        self.history.add_scored(index, scored)
        return at, scored

    def forget_scored(self) -> None:
        """Count scored runs and levels from here on: what came before serves as reference only."""
        self.n_scored = 0
        for name, codes in self.levels.items():
            codes.clear()
            self._n_in_level[name] = np.zeros(0, dtype=np.int64)
        self.history.forget_scored()

    def _group(self, name: str, block: RunBlock, at: IntArray) -> Grouping:
        labels = block.nuisance[name]
        code = self.levels[name].encode([labels[i] for i in at.tolist()])
        earlier = np.zeros(len(self.levels[name]), dtype=np.int64)
        earlier[: self._n_in_level[name].size] = self._n_in_level[name]
        groups = group(code, earlier)
        self._n_in_level[name] = earlier + np.bincount(code, minlength=earlier.size)
        return groups

    def _parents(self, block: RunBlock, at: IntArray, index: IntArray) -> tuple[FloatArray, FloatArray]:
        """Give score and reliability of each run's parent if that came earlier, else NaN and 0."""
        if block.parents is None or not self._has_parents:
            return np.full(at.size, np.nan), np.zeros(at.size)
        parent = block.parents[at]
        earlier = (parent >= 0) & (parent < index)
        parent = np.where(earlier, parent, 0)
        z = np.where(earlier, self.history.z[parent], np.nan)
        return z, np.where(earlier, self.history.reliability[parent], 0.0)
