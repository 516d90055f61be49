"""Do restarted runs resemble their parents? By the correlation of their scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints


class LineageParent:
    """Detect inherited results by the correlation of children's scores with their parents'.

    Null hypothesis: a run's value does not depend on its parent's. Alternative, two-sided: it does.
    Assumptions: no other dependence between runs that stand near each other.
    """

    name: ClassVar[str] = "parent_correlation"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, a run's value does not depend on its parent's"
    assumes: ClassVar[str] = "no other dependence; any law, in large samples"
    source: ClassVar[str] = "Fisher (1915), Biometrika 10:507-521, on normal scores"
    n_min: ClassVar[int] = 10
    needs_order: ClassVar[bool] = False
    tiny: ClassVar[float] = 0.05
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer with the correlation as effect."""
        from scipy.special import ndtr

        parents = view.series.parents
        if parents is None:
            raise NotTestable("parents", "none stated")
        child = np.flatnonzero(parents >= 0)
        if len(child) < self.n_min:
            raise NotTestable(f"{self.n_min} runs with a completed parent", len(child))
        a, b = view.scores[child], view.scores[parents[child]]
        if not a.std() > 1e-9 or not b.std() > 1e-9:
            raise NotTestable("results that vary", "constant results")
        r = float(np.clip(np.corrcoef(a, b)[0, 1], -0.999999, 0.999999))
        error = 1 / float(np.sqrt(len(child) - 3))
        z = float(np.arctanh(r)) / error
        pvalue = 2 * float(ndtr(-abs(z)))
        if view.needs_permutation:
            null = _products(view.permutations(), child, parents)
            observed = float(_products(view.scores[None, :], child, parents)[0])
            pvalue = min(1.0, 2 * permutation_pvalue(observed, null, "normal"))
        low, high = np.tanh(np.arctanh(r) + np.array([-Z, Z]) * error)
        effect = Effect(name="correlation with the parent", value=r, low=float(low), high=float(high))
        return answered(self, view, statistic=z, pvalue=pvalue, effect=effect, n=len(child))


def _products(rows: Floats, child: Ints, parents: Ints) -> Floats:
    return np.asarray((rows[:, child] * rows[:, parents[child]]).sum(axis=1))
