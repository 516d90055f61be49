"""Whether residuals are normal, and whether that matters at this number of runs."""

from __future__ import annotations

from typing import ClassVar

import msgspec
import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View
from auditd.records import Effect

N_CELL_LARGE = 30.0
"""Runs a cell from which means are close to normal unless tails are very heavy (common practice)."""
N_USED = 200_000
"""Residuals used at most, evenly spaced in the order."""


class ShapeNormality:
    """Detect residuals that are not normal by Anderson and Darling's statistic.

    Null hypothesis: residuals from the cells' means are normal. Alternative: they are not.
    Assumptions: independence, equal spread.
    """

    name: ClassVar[str] = "anderson_darling"
    family: ClassVar[Family] = "shape"
    null: ClassVar[str] = "residuals from the cells' means are normal"
    assumes: ClassVar[str] = "independent residuals of equal spread"
    source: ClassVar[str] = "Anderson & Darling (1952, 1954); Stephens (1974), JASA 69:730-737"
    n_min: ClassVar[int] = 8

    def ask(self, view: View) -> Answer:
        """Return the answer, with the remark whether it matters here."""
        from auditd.stats import anderson_darling

        values = view.values[:: max(1, view.n // N_USED)]
        found = anderson_darling(values)
        centred = values - values.mean()
        kurtosis = float((centred**4).mean() / max(float((centred**2).mean()) ** 2, 1e-300)) - 3
        answer = answered(
            self,
            view,
            statistic=found.statistic,
            pvalue=found.pvalue,
            effect=Effect(name="excess kurtosis", value=kurtosis),
        )
        return msgspec.structs.replace(answer, reason=_remark(view))


def _remark(view: View) -> str:
    a_cell = view.n / max(len(np.unique(view.cells)), 1)
    if a_cell >= N_CELL_LARGE:
        return f"matters little for means: {a_cell:.0f} runs a cell (central limit theorem)"
    return f"matters for intervals of means: only {a_cell:.0f} runs a cell"
