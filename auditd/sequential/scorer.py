"""Scores: each run's normal conformal rank against earlier runs."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput
from auditd.sequential.baseline_formula import FormulaBaseline
from auditd.sequential.baseline_pooled import PooledBaseline
from auditd.sequential.conformal_rank import ConformalRanks
from auditd.sequential.levels import LevelCodes
from auditd.sequential.options import Options
from auditd.sequential.run_block import RunBlock
from auditd.sequential.uniform import uniforms

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_RUNS_AT_ONCE = 16_384
"""Runs ranked at once: bounds memory, and spreads a merge of the reference over many runs."""


class Scorer:
    """Turns runs into scores z = Φ⁻¹(p); NaN where a run has no response or no reference."""

    def __init__(self, options: Options) -> None:
        self._options = options
        self._codes = LevelCodes()
        self._ranks = ConformalRanks()
        self._pooled = PooledBaseline()
        self._formula = FormulaBaseline()

    def score(self, block: RunBlock) -> FloatArray:
        """Give the scores of the next runs, which then join the reference."""
        parts = [
            self._score(block, slice(begin, begin + N_RUNS_AT_ONCE))
            for begin in range(0, block.values.size, N_RUNS_AT_ONCE)
        ]
        return np.concatenate(parts) if parts else np.empty(0)

    def learn(self, block: RunBlock) -> None:
        """Take runs into the reference without scoring them, when their scores are already known."""
        at, ranked, cells = self._ranked(block, slice(None))
        if at.size:
            self._ranks.learn(ranked, cells)

    def _score(self, block: RunBlock, part: slice) -> FloatArray:
        from scipy.special import ndtri

        z = np.full(block.values[part].size, np.nan)
        at, ranked, cells = self._ranked(block, part)
        ids = block.ids[part]
        uniform = uniforms(
            [ids[i] for i in at.tolist()], response=self._options.response, key=self._options.key
        )
        p, has_reference = self._ranks.rank(ranked, cells, uniform)
        z[at[has_reference]] = ndtri(p[has_reference])
        return z

    def _ranked(self, block: RunBlock, part: slice) -> tuple[IntArray, FloatArray, IntArray]:
        """Give positions, the values that are ranked, and the codes of the sets in which they are."""
        values = block.values[part]
        at = np.flatnonzero(np.isfinite(values))
        values = values[at]
        if self._options.baseline == "formula":
            if block.design is None:
                raise BadInput('baseline="formula" needs a design, one row a run')
            residual = self._formula.residuals(values, block.design[part][at])
        else:
            cells = block.cells[part]
            codes = self._codes.encode([cells[i] for i in at.tolist()])
            if self._options.baseline == "cells":
                return at, values, codes
            residual = self._pooled.residuals(values, codes)
        known = np.isfinite(residual)
        return at[known], residual[known], np.zeros(int(known.sum()), dtype=np.int64)
