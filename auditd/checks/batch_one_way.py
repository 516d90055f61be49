"""Do a nuisance's levels differ? By the one-way F ratio of the scores; asked of a view with groups."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View, permutation_pvalue
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints


class BatchOneWay:
    """Detect differences between a nuisance's levels by the one-way F ratio.

    Null hypothesis: within cells a run's value does not depend on the level that it was made on. Alternative:
    levels differ. Assumptions: no other dependence; a drift shows here when levels ran at different times.
    """

    name: ClassVar[str] = "one_way"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, levels do not differ"
    assumes: ClassVar[str] = (
        "levels do not depend on results; any law; a drift shows where levels ran apart in time"
    )
    source: ClassVar[str] = (
        "Fisher (1925), Statistical Methods for Research Workers; Donner (1986) on the ICC"
    )
    n_min: ClassVar[int] = 10

    def ask(self, view: View) -> Answer:
        """Return the answer with the intraclass correlation, on the audited scale, as effect."""
        from auditd.stats import one_way

        if view.groups is None:
            raise NotTestable("levels of a nuisance", "none")
        found = one_way(view.scores, view.groups)
        pvalue = found.pvalue
        if view.needs_permutation:
            null = np.array([_between(scores, view.groups) for scores in view.permutations()])
            pvalue = permutation_pvalue(_between(view.scores, view.groups), null)
        on_scale = one_way(view.values, view.groups)
        effect = Effect(
            name="intraclass correlation",
            value=float(on_scale.icc),
            low=float(on_scale.icc_low),
            high=float(on_scale.icc_high),
        )
        return answered(self, view, statistic=found.statistic, pvalue=pvalue, effect=effect)


def _between(scores: Floats, groups: Ints) -> float:
    counts = np.bincount(groups)
    sums = np.bincount(groups, scores)
    used = counts > 0
    return float((sums[used] ** 2 / counts[used]).sum())
