"""Does the level rise or fall along the order? By Mann and Kendall's test, in the whole or within levels."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View, segments
from auditd.records import Effect
from auditd.series.table import Floats

N_KENDALL = 500
"""Runs above which the linear rank statistic takes Kendall's place: against a straight drift it is as
powerful asymptotically, and it takes 10 ms for 10⁶ runs where Kendall's count and the slopes that come with
it take 5 s."""
AS_SCORES = "by the linear statistic of normal scores, asymptotically equal (Hájek & Šidák 1967, III.6)"


class DriftMannKendall:
    """Detect a monotone drift in a response by concordance with the order.

    Null hypothesis: within cells the values come in random order. Alternative, two-sided: they rise or fall;
    within levels: on any of them, by the sum of squared z (van Belle & Hughes 1984). Assumptions: no serial
    dependence; with it trends are found too often, and `von_neumann_rank` shows it.
    """

    name: ClassVar[str] = "mann_kendall"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values neither rise nor fall along the order"
    assumes: ClassVar[str] = "no serial dependence besides; any law"
    source: ClassVar[str] = (
        "Mann (1945), Econometrica 13:245-259; Kendall (1975), Rank Correlation Methods; within levels: van "
        "Belle & Hughes (1984), Water Resources Research 20:127-136"
    )
    n_min: ClassVar[int] = 10
    needs_order: ClassVar[bool] = True
    tiny: ClassVar[float] = 0.1
    unit: ClassVar[Unit] = "response"

    def ask(self, view: View) -> Answer:
        """Return the answer with the drift over the order, in response units, as effect."""
        if view.groups is not None:
            return self._within(view)
        z, reason = _trend(view.scores)
        pvalue = _two_sided(z)
        if view.needs_permutation:
            null = (view.permutations() @ _centred_order(view.n)) ** 2
            observed = float(view.scores @ _centred_order(view.n)) ** 2
            pvalue = permutation_pvalue(observed, null, "gamma")
        return answered(
            self, view, statistic=z, pvalue=pvalue, effect=_rise(view.values, "from first run to last"),
            reason=reason,
        )  # fmt: skip

    def _within(self, view: View) -> Answer:
        from scipy.special import chdtrc

        parts = segments(view.groups) if view.groups is not None else []
        squares = [float(_z_rows(view.scores[None, part])[0]) ** 2 for part in parts]
        most = int(np.argmax(squares))
        level = view.levels[int(view.groups[parts[most].start])] if view.groups is not None else ""
        total = float(sum(squares))
        pvalue = float(chdtrc(len(parts), total))
        if view.needs_permutation:
            rows = view.permutations()
            null = sum((_z_rows(rows[:, part]) ** 2 for part in parts), np.zeros(1))
            pvalue = permutation_pvalue(total, null, "gamma")
        effect = _rise(view.values[parts[most]], f"on {level}")
        return answered(self, view, statistic=total, pvalue=pvalue, effect=effect, reason=AS_SCORES)


def _trend(scores: Floats) -> tuple[float, str | None]:
    """Return z of the trend, and how it was found where not by Kendall's count; 0 for constant scores."""
    from auditd.stats import mann_kendall

    if not scores.max() > scores.min():
        return 0.0, None
    if len(scores) > N_KENDALL:
        return float(_z_rows(scores[None, :])[0]), AS_SCORES
    return float(mann_kendall(scores).statistic), None


def _z_rows(rows: Floats) -> Floats:
    """Return for each row the linear rank statistic over its standard deviation in random order."""
    order = _centred_order(rows.shape[1])
    around = rows - rows.mean(axis=1, keepdims=True)
    variance = (order @ order) * (around**2).sum(axis=1) / (rows.shape[1] - 1)
    return np.asarray((around @ order) / np.sqrt(np.maximum(variance, 1e-300)))


def _centred_order(n: int) -> Floats:
    order: Floats = np.arange(n, dtype=np.float64) - (n - 1) / 2
    return order


def _two_sided(z: float) -> float:
    from scipy.special import ndtr

    return 2 * float(ndtr(-abs(z)))


def _rise(values: Floats, where: str) -> Effect:
    """Return the least-squares rise from the first run to the last."""
    order = _centred_order(len(values))
    slope = float(order @ values) / float(order @ order)
    rest = values - values.mean() - slope * order
    error = float(np.sqrt(rest @ rest / max(len(values) - 2, 1) / (order @ order)))
    rise, half = slope * (len(values) - 1), Z * error * (len(values) - 1)
    return Effect(name=f"rise {where}", value=rise, low=rise - half, high=rise + half)
