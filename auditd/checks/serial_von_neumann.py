"""Are neighbours alike? By the rank von Neumann ratio, in the whole order or within levels."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View, segments
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints


class SerialVonNeumann:
    """Detect resemblance of neighbours in a response by squared steps of ranks.

    Null hypothesis: within cells values come in random order. Alternative, one-sided: neighbours are alike.
    Within levels each level has its own ratio; their means, weighted by inverse variances, are asked.
    Assumptions: labels and order do not depend on results. A step or trend shows here too.
    """

    name: ClassVar[str] = "von_neumann_rank"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, values come in random order"
    assumes: ClassVar[str] = "order and labels do not depend on results; any law; a step or trend shows too"
    source: ClassVar[str] = "Bartels (1982), JASA 77:40-46"
    n_min: ClassVar[int] = 10
    needs_order: ClassVar[bool] = True
    tiny: ClassVar[float] = 0.05
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer; p by Bartels' approximation, or by permutation where cells are small."""
        from scipy.special import betainc

        groups = np.zeros(view.n, dtype=np.int64) if view.groups is None else view.groups
        sizes = np.bincount(groups)[np.unique(groups)]
        weights = 1 / bartels_variance(sizes)
        ratio = _pooled_ratio(ranks_within(view.scores, groups)[None, :], groups, weights)[0]
        tied = view.tied(1) if view.groups is None else 0.0
        ratio -= 2 * (tied - 1) / view.n if tied else 0.0
        shape = 2 * weights.sum() - 0.5
        pvalue = float(betainc(shape, shape, min(max(ratio / 4, 0.0), 1.0)))
        if view.needs_permutation:
            null = _pooled_ratio(view.permutations(), groups, weights)
            pvalue = permutation_pvalue(
                -_pooled_ratio(view.scores[None, :], groups, weights)[0], -null, "normal"
            )
        return answered(self, view, statistic=ratio, pvalue=pvalue, effect=lag_one(view))


def bartels_variance(n: Ints) -> Floats:
    """Return the variance of the rank von Neumann ratio over all orders of n ranks (Bartels 1982)."""
    m = n.astype(np.float64)
    found: Floats = 4 * (m - 2) * (5 * m * m - 2 * m - 9) / (5 * m * (m + 1) * (m - 1) ** 2)
    return found


def ranks_within(scores: Floats, groups: Ints) -> Floats:
    """Return mean ranks within stretches of equal groups."""
    from scipy.stats import rankdata

    found = np.empty(len(scores))
    for part in segments(groups):
        found[part] = rankdata(scores[part])
    return found


def _pooled_ratio(rows: Floats, groups: Ints, weights: Floats) -> Floats:
    """Return for each row the mean over levels of Σ steps² / Σ deviations²; a constant level counts as 2."""
    total = np.zeros(len(rows))
    for part, weight in zip(segments(groups), weights.tolist(), strict=True):
        x = rows[:, part]
        steps = (np.diff(x, axis=1) ** 2).sum(axis=1)
        around = ((x - x.mean(axis=1, keepdims=True)) ** 2).sum(axis=1)
        varies = around > 1e-12
        total += weight * np.where(varies, steps / np.where(varies, around, 1.0), 2.0)
    return np.asarray(total / weights.sum())


def lag_one(view: View) -> Effect:
    """Return the lag-1 correlation of the scores within this order, with its large-sample interval."""
    return correlation_at(view, 1)


def correlation_at(view: View, lag: int, *, z: float = Z) -> Effect:
    """Return the correlation of scores `lag` runs apart, within levels where the view has them.

    Raises
    ------
    NotTestable
        No two runs of a level are so far apart.
    """
    a, b = view.scores[:-lag], view.scores[lag:]
    tied = view.tied(lag)
    if view.groups is not None:
        same = view.groups[:-lag] == view.groups[lag:]
        a, b, tied = a[same], b[same], 0.0
    whole = float(view.scores @ view.scores) / view.n
    if len(a) == 0 or not whole > 0:
        raise NotTestable(f"varying results {lag} runs apart", "none")
    r = float(np.clip((float(a @ b) + tied * whole) / len(a) / whole, -1.0, 1.0))
    half = z * float(np.sqrt(max(1 - r * r, 1 / view.n) / len(a)))
    return Effect(name=f"lag-{lag} correlation", value=r, low=max(r - half, -1.0), high=min(r + half, 1.0))
