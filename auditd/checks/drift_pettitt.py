"""Does the level change at some run? By Pettitt's test of the scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View
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
    needs_order: ClassVar[bool] = True
    tiny: ClassVar[float] = 0.1
    unit: ClassVar[Unit] = "response"

    def ask(self, view: View) -> Answer:
        """Return the answer with the shift at the most probable run as effect."""
        from auditd.stats import pettitt

        found = pettitt(view.scores)
        pvalue = found.pvalue
        if view.needs_permutation:
            null = _largest_sums(view.permutations())
            pvalue = permutation_pvalue(float(_largest_sums(view.scores[None, :])[0]), null, "gamma")
        effect = _shift(view, found.index)
        return answered(self, view, statistic=found.statistic, pvalue=pvalue, effect=effect)


def _largest_sums(rows: Floats) -> Floats:
    """Return for each row the largest |Σ scores|."""
    return np.asarray(np.abs(np.cumsum(rows, axis=1)).max(axis=1))


def _shift(view: View, last_before: int) -> Effect:
    """Return the mean from a run on less that before it."""
    before, after = view.values[: last_before + 1], view.values[last_before + 1 :]
    name = f"shift from run {view.series.ids[view.rows[last_before + 1]]} on"
    shift = float(after.mean() - before.mean())
    if min(len(before), len(after)) < 2:
        return Effect(name=name, value=shift)
    half = Z * float(np.sqrt(before.var(ddof=1) / len(before) + after.var(ddof=1) / len(after)))
    return Effect(name=name, value=shift, low=shift - half, high=shift + half)
