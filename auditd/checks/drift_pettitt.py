"""Does the level change at some run? By Pettitt's test, in the whole order or on one level."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import LEVEL, Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View, segments
from auditd.records import Effect
from auditd.series.table import Floats


class DriftPettitt:
    """Detect one change of level in a response by the largest rank-sum difference.

    Null hypothesis: within cells all values have one distribution. Alternative: another from some run on;
    within levels: on one of them, by the smallest p-value times the number of levels (Bonferroni).
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

        parts = [slice(0, view.n)] if view.groups is None else segments(view.groups)
        asked = [part for part in parts if np.ptp(view.scores[part]) > 0]
        found = [pettitt(view.scores[part]) for part in asked]
        most = int(np.argmin([one.pvalue for one in found]))
        pvalue = min(1.0, found[most].pvalue * len(found))
        if view.needs_permutation:
            null = np.max([_largest_sums(view.permutations()[:, part]) for part in asked], axis=0)
            observed = max(float(_largest_sums(view.scores[None, part])[0]) for part in asked)
            pvalue = permutation_pvalue(observed, null, "gamma")
        shown, reason = most, None
        if view.groups is not None:
            sure = [k for k, one in enumerate(found) if one.pvalue * len(found) <= LEVEL]
            shifts = [abs(_shift(view, asked[k], found[k].index).value) for k in sure]
            shown = sure[int(np.argmax(shifts))] if sure else most
            reason = f"{len(sure)} of {len(parts)} levels change by themselves; shown is the largest change"
        effect = _shift(view, asked[shown], found[shown].index)
        return answered(
            self, view, statistic=found[most].statistic, pvalue=pvalue, effect=effect, reason=reason
        )


def _largest_sums(rows: Floats) -> Floats:
    """Return for each row the largest |Σ deviations| over √n, which levels of any size share."""
    around = rows - rows.mean(axis=1, keepdims=True)
    return np.asarray(np.abs(np.cumsum(around, axis=1)).max(axis=1) / np.sqrt(rows.shape[1]))


def _shift(view: View, part: slice, last_before: int) -> Effect:
    """Return the mean from a run on less that before it."""
    values, rows = view.values[part], view.rows[part]
    on = "" if view.groups is None else f" on {view.levels[int(view.groups[part.start])]}"
    before, after = values[: last_before + 1], values[last_before + 1 :]
    first_after = str(view.series.ids[rows[last_before + 1]])
    name = f"shift{on} from run {first_after} on"
    shift = float(after.mean() - before.mean())
    if min(len(before), len(after)) < 2:
        return Effect(name=name, value=shift)
    half = Z * float(np.sqrt(before.var(ddof=1) / len(before) + after.var(ddof=1) / len(after)))
    return Effect(name=name, value=shift, low=shift - half, high=shift + half)
