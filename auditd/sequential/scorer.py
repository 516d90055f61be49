"""Scores: each run's normal conformal rank against earlier runs."""

from __future__ import annotations

from dataclasses import dataclass

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


N_LOST = 2.0
"""A rank among m earlier runs has reliability m / (m + 3): its normal score's squared correlation with the
score against an endless reference. Fits simulated values for m = 1 … 99 within 0.05 (0.01 from m = 6 on)."""

N_RELIABLE = 2000
"""Earlier runs from which on a rank counts as wholly reliable."""


@dataclass(frozen=True, kw_only=True)
class Scores:
    """Scores of a block; (n,) each, NaN and 0 where a run is not scored."""

    z: FloatArray
    reliability: FloatArray


class Scorer:
    """Turns runs into scores z = Φ⁻¹(p); NaN where a run has no response or no reference."""

    def __init__(self, options: Options) -> None:
        self._options = options
        self._codes = LevelCodes()
        self._ranks = ConformalRanks()
        self._pooled = PooledBaseline()
        self._formula = FormulaBaseline()

    def score(self, block: RunBlock) -> Scores:
        """Give the scores of the next runs, which then join the reference."""
        n = block.values.size
        scores = Scores(z=np.full(n, np.nan), reliability=np.zeros(n))
        for begin in range(0, n, N_RUNS_AT_ONCE):
            self._score(block, slice(begin, begin + N_RUNS_AT_ONCE), scores)
        return scores

    def _score(self, block: RunBlock, part: slice, scores: Scores) -> None:
        from scipy.special import ndtri

        at, ranked, cells, share = self._ranked(block, part)
        ids = block.ids[part]
        uniform = uniforms(
            [ids[i] for i in at.tolist()], response=self._options.response, key=self._options.key
        )
        p, earlier = self._ranks.rank(ranked, cells, uniform)
        known = earlier > 0
        scores.z[part][at[known]] = ndtri(p[known])
        reliability = np.where(earlier < N_RELIABLE, earlier / (earlier + 1.0 + N_LOST), 1.0) * share
        scores.reliability[part][at[known]] = reliability[known]

    def _ranked(self, block: RunBlock, part: slice) -> tuple[IntArray, FloatArray, IntArray, FloatArray]:
        """Give positions, the values ranked, codes of the sets they rank in, and each one's own share."""
        values = block.values[part]
        at = np.flatnonzero(np.isfinite(values))
        values = values[at]
        if self._options.baseline == "formula":
            if block.design is None:
                raise BadInput('baseline="formula" needs a design, one row a run')
            residual, share = self._formula.residuals(values, block.design[part][at])
        else:
            cells = block.cells[part]
            codes = self._codes.encode([cells[i] for i in at.tolist()])
            if self._options.baseline == "cells":
                return at, values, codes, np.ones(at.size)
            residual, share = self._pooled.residuals(values, codes)
        known = np.isfinite(residual)
        return at[known], residual[known], np.zeros(int(known.sum()), dtype=np.int64), share[known]
