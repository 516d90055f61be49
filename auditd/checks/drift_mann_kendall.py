"""Does the level rise or fall along the order? By Mann and Kendall's test of the scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View, permutation_pvalue
from auditd.records import Effect


class DriftMannKendall:
    """Detect a monotone drift in a response by concordance with the order.

    Null hypothesis: within cells the values come in random order. Alternative, two-sided: they rise or fall.
    Assumptions: no serial dependence; with it trends are found too often, and `von_neumann_rank` shows it.
    """

    name: ClassVar[str] = "mann_kendall"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values neither rise nor fall along the order"
    assumes: ClassVar[str] = "no serial dependence besides; any law"
    source: ClassVar[str] = "Mann (1945), Econometrica 13:245-259; Kendall (1975), Rank Correlation Methods"
    n_min: ClassVar[int] = 10

    def ask(self, view: View) -> Answer:
        """Return the answer with the drift over the whole order, in response units, as effect."""
        from auditd.stats import mann_kendall

        found = mann_kendall(view.scores)
        pvalue = found.pvalue
        if view.needs_permutation:
            order = np.arange(view.n) - (view.n - 1) / 2
            null = np.array([abs(float(order @ scores)) for scores in view.permutations()])
            pvalue = permutation_pvalue(abs(float(order @ view.scores)), null)
        return answered(self, view, statistic=found.statistic, pvalue=pvalue, effect=_rise(view))


def _rise(view: View) -> Effect:
    """Return the least-squares rise from the first run to the last."""
    order = np.arange(view.n) - (view.n - 1) / 2
    slope = float(order @ view.values) / float(order @ order)
    rest = view.values - slope * order
    error = float(np.sqrt(rest @ rest / max(view.n - 2, 1) / (order @ order)))
    rise = slope * (view.n - 1)
    half = 1.96 * error * (view.n - 1)
    return Effect(name="rise from first run to last", value=rise, low=rise - half, high=rise + half)
