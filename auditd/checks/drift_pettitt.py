"""Does the level change at some run? By Pettitt's test of the scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View, permutation_pvalue
from auditd.records import Effect
from auditd.series.table import Floats


class DriftPettitt:
    """Detect one change of level in a response by the largest rank-sum difference.

    Null hypothesis: within cells all values have one distribution. Alternative: another from some run on.
    Assumptions: no serial dependence; a trend or slow correlation shows here too.
    """

    name: ClassVar[str] = "pettitt"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, all values come from one distribution"
    assumes: ClassVar[str] = "no serial dependence besides; any law"
    source: ClassVar[str] = "Pettitt (1979), Applied Statistics 28:126-135"
    n_min: ClassVar[int] = 10

    def ask(self, view: View) -> Answer:
        """Return the answer with the shift at the most probable run as effect."""
        from auditd.stats import pettitt

        found = pettitt(view.scores)
        pvalue = found.pvalue
        if view.needs_permutation:
            null = np.array([_largest_sum(scores) for scores in view.permutations()])
            pvalue = permutation_pvalue(_largest_sum(view.scores), null)
        return answered(
            self, view, statistic=found.statistic, pvalue=pvalue, effect=_shift(view, found.index)
        )


def _largest_sum(scores: Floats) -> float:
    return float(np.abs(np.cumsum(scores)).max())


def _shift(view: View, last_before: int) -> Effect:
    before, after = view.values[: last_before + 1], view.values[last_before + 1 :]
    place = view.series.positions[view.rows[min(last_before + 1, view.n - 1)]]
    name = f"shift from position {place} on"
    if min(len(before), len(after)) < 2:
        return Effect(name=name, value=float(view.values[-1] - view.values[0]))
    shift = float(after.mean() - before.mean())
    half = 1.96 * float(np.sqrt(before.var(ddof=1) / len(before) + after.var(ddof=1) / len(after)))
    return Effect(name=name, value=shift, low=shift - half, high=shift + half)
