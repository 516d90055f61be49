"""Does one level shift at some run, however early? By the maximally selected rank statistic."""

from __future__ import annotations

from typing import ClassVar, NamedTuple

import numpy as np

from auditd.checks.answer import LEVEL, Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View, segments
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats

EDGE_SHARE = 0.01
"""Share of a level's runs at either end within which no change is sought …"""
N_EDGE = 5
"""… and at least so many runs."""


class _Shift(NamedTuple):
    """The best split of a level: its stretch of the view, statistic and p-value by the scores, and the runs
    before the change by the values, which also tell a large change from a certain one.
    """

    part: slice
    largest: float
    pvalue: float
    n_before: int


class DriftSelectedShift:
    """Detect a change of one level at some run by the largest standardised difference over all splits.

    Null hypothesis: on each level, within cells, all values have one distribution. Alternative: on some level
    another from some run on. Unlike Pettitt's statistic it sees changes near the ends, as on a host that
    changes in its first days. The smallest p-value counts, times the number of levels (Bonferroni).
    Assumptions: no serial dependence; a trend or slow correlation shows here too.
    """

    name: ClassVar[str] = "selected_shift"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, all values of a level come from one distribution"
    assumes: ClassVar[str] = "no serial dependence besides; any law"
    source: ClassVar[str] = "Miller & Siegmund (1982), Biometrics 38:1011-1016"
    n_min: ClassVar[int] = 20
    needs_order: ClassVar[bool] = True
    tiny: ClassVar[float] = 0.1
    unit: ClassVar[Unit] = "response"

    def ask(self, view: View) -> Answer:
        """Return the answer; the effect is the largest shift among the levels that change by themselves."""
        parts = [slice(0, view.n)] if view.groups is None else segments(view.groups)
        asked = [
            part
            for part in parts
            if part.stop - part.start >= self.n_min and np.ptp(view.scores[part]) > 1e-9
        ]
        if not asked:
            raise NotTestable(f"a level with {self.n_min} runs that vary", "none")
        found = [_best_split(view.scores[part], view.values[part], part) for part in asked]
        least = min(found, key=lambda one: one.pvalue)
        pvalue = min(1.0, least.pvalue * len(found))
        if view.needs_permutation:
            rows = view.permutations()
            null = np.max([_largest(rows[:, one.part]).max(axis=1) for one in found], axis=0)
            pvalue = permutation_pvalue(max(one.largest for one in found), null, "gamma")
        sure = [one for one in found if one.pvalue * len(found) <= LEVEL]
        effects = [(abs(_shift(view, one).value), k) for k, one in enumerate(sure)]
        shown = sure[max(effects)[1]] if sure else least
        return answered(
            self,
            view,
            statistic=least.largest,
            pvalue=pvalue,
            effect=_shift(view, shown),
            n=sum(part.stop - part.start for part in asked),
            reason=f"{len(sure)} of {len(asked)} levels change by themselves"
            + ("; shown is the largest change" if len(sure) > 1 else ""),
        )


def selected_pvalue(largest: float, edge: float) -> float:
    """Return P(max over splits of |standardised difference| ≥ largest), splits from `edge` to 1 − `edge`.

    Miller & Siegmund (1982), equation 8; an approximation for small p-values, cut at 1.
    """
    if largest < 1.0:
        return 1.0
    density = float(np.exp(-0.5 * largest**2) / np.sqrt(2 * np.pi))
    odds = 2 * np.log((1 - edge) / edge)
    return min(1.0, float(4 * density / largest + density * (largest - 1 / largest) * odds))


def _edge(n: int) -> int:
    return max(N_EDGE, int(np.ceil(EDGE_SHARE * n)))


def _largest(rows: Floats) -> Floats:
    """Return for each row and split the standardised difference, in absolute terms: (rows, splits)."""
    n = rows.shape[1]
    edge = _edge(n)
    around = rows - rows.mean(axis=1, keepdims=True)
    spread = np.sqrt((around**2).sum(axis=1, keepdims=True) / (n - 1))
    before = np.arange(1, n + 1)
    sums = np.cumsum(around, axis=1)[:, edge - 1 : n - edge]
    share = before[edge - 1 : n - edge]
    return np.asarray(np.abs(sums) / np.sqrt(share * (n - share) / n) / np.maximum(spread, 1e-12))


def _best_split(scores: Floats, values: Floats, part: slice) -> _Shift:
    edge = _edge(len(scores))
    largest = float(_largest(scores[None, :]).max())
    n_before = edge + int(np.argmax(_largest(values[None, :])[0]))
    return _Shift(part, largest, selected_pvalue(largest, edge / len(scores)), n_before)


def _shift(view: View, found: _Shift) -> Effect:
    values, rows = view.values[found.part], view.rows[found.part]
    on = "" if view.groups is None else f" on {view.levels[int(view.groups[found.part.start])]}"
    before, after = values[: found.n_before], values[found.n_before :]
    first_after = str(view.series.ids[rows[found.n_before]])
    shift = float(after.mean() - before.mean())
    half = Z * float(np.sqrt(before.var(ddof=1) / len(before) + after.var(ddof=1) / len(after)))
    return Effect(
        name=f"shift{on} from run {first_after} on", value=shift, low=shift - half, high=shift + half
    )
