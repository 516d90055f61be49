"""Are neighbours alike? By the rank von Neumann ratio."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View, permutation_pvalue
from auditd.records import Effect
from auditd.series.table import Floats


class SerialVonNeumann:
    """Detect resemblance of neighbours in a response by squared steps of ranks.

    Null hypothesis: within cells values come in random order. Alternative, one-sided: neighbours are alike.
    Assumptions: labels and order do not depend on results. A step or trend shows here too.
    """

    name: ClassVar[str] = "von_neumann_rank"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values come in random order"
    assumes: ClassVar[str] = "order and labels do not depend on results; any law"
    source: ClassVar[str] = "Bartels (1982), JASA 77:40-46"
    n_min: ClassVar[int] = 10

    def ask(self, view: View) -> Answer:
        """Return the answer; p by Bartels' approximation, or by permutation where cells are small."""
        from auditd.stats import von_neumann_rank

        found = von_neumann_rank(view.scores, alternative="positive")
        pvalue = found.pvalue
        if view.needs_permutation:
            null = np.array([-_steps(scores) for scores in view.permutations()])
            pvalue = permutation_pvalue(-_steps(view.scores), null)
        return answered(self, view, statistic=found.statistic, pvalue=pvalue, effect=lag_one(view))


def _steps(scores: Floats) -> float:
    steps = np.diff(scores)
    return float(steps @ steps)


def lag_one(view: View) -> Effect:
    """Return the lag-1 correlation of the scores within this order, with its large-sample interval."""
    a, b = view.scores[:-1], view.scores[1:]
    if view.groups is not None:
        same = view.groups[:-1] == view.groups[1:]
        a, b = a[same], b[same]
    whole = float(view.scores @ view.scores) / view.n
    r = float(a @ b) / len(a) / whole if len(a) and whole > 0 else 0.0
    half = 1.96 * np.sqrt(max(1 - r * r, 0.0) / max(len(a), 1))
    return Effect(name="lag-1 correlation", value=r, low=max(r - half, -1.0), high=min(r + half, 1.0))
