"""Do a nuisance's levels differ? By the F ratio of the scores' sums on levels, within cells."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.level_layout import Layout, layout
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints

DF_MIN = 0.5
"""Degrees of freedom below which cells and levels are as good as aliased."""


class BatchOneWay:
    """Detect differences between a nuisance's levels by the one-way F ratio within cells.

    Null hypothesis: within cells a run's value does not depend on the level that it was made on. Alternative:
    levels differ. Only cells that met two levels or more can tell, and only they enter. Assumptions: no other
    dependence; a drift shows here when levels ran at different times.
    """

    name: ClassVar[str] = "one_way"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, levels do not differ"
    assumes: ClassVar[str] = (
        "levels do not depend on results; any law; a drift shows where levels ran apart in time"
    )
    source: ClassVar[str] = (
        "Fisher (1925), Statistical Methods for Research Workers; interval: Donner (1986), Int. Stat. Rev. "
        "54:67-82; cells: Searle, Casella & McCulloch (1992), Variance Components, 5.5"
    )
    n_min: ClassVar[int] = 10
    needs_order: ClassVar[bool] = False
    tiny: ClassVar[float] = 0.01
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer with the intraclass correlation of the scores within cells as effect."""
        from scipy.special import fdtrc

        if view.groups is None:
            raise NotTestable("levels of a nuisance", "none")
        use = _informative(view.cells, view.groups)
        _check_can_tell(view, use)
        cells, groups = view.cells[use], np.unique(view.groups[use], return_inverse=True)[1]
        lie = layout(cells, groups)
        if lie.df < DF_MIN:
            raise NotTestable("levels that cells share", f"cells and levels of {view.along} are aliased")
        if lie.df_within < 1:
            raise NotTestable("two runs of a cell on one level", "one run a level in each cell")
        between = float(_between(view.scores[None, use], groups)[0])
        total = float(view.scores[use] @ view.scores[use])
        within = max(total - between, 1e-12 * total)
        ratio = (between / lie.df) / (within / lie.df_within)
        pvalue = float(fdtrc(lie.df, lie.df_within, ratio))
        if view.needs_permutation:
            null = _between(view.permutations()[:, use], groups)
            pvalue = permutation_pvalue(between, null, "gamma")
        effect = _intraclass(ratio, lie)
        return answered(self, view, statistic=ratio, pvalue=pvalue, effect=effect, n=len(groups))


def _informative(cells: Ints, groups: Ints) -> Ints:
    """Return the runs of cells that met two levels or more."""
    n_groups = int(groups.max()) + 1
    met = np.bincount(np.unique(cells * n_groups + groups) // n_groups, minlength=int(cells.max()) + 1)
    return np.flatnonzero(met[cells] > 1)


def _check_can_tell(view: View, use: Ints) -> None:
    groups = view.groups if view.groups is not None else view.cells
    n_levels = len(np.unique(groups))
    if n_levels < 2:
        raise NotTestable("two levels", "one")
    if n_levels == view.n:
        raise NotTestable("a level with two runs", "one run a level: its effect cannot be told from a run's")
    if len(use) == 0:
        raise NotTestable(
            f"a cell on two levels of {view.along}",
            "each cell on one level: their effects cannot be told apart",
        )
    if not np.any(view.scores[use]):
        raise NotTestable("results that vary in cells on two levels", "constant ones")


def _between(rows: Floats, groups: Ints) -> Floats:
    """Return for each row Σ over levels of (sum on the level)² / runs on it."""
    order = np.argsort(groups, kind="stable")
    starts = np.flatnonzero(np.diff(groups[order], prepend=-1))
    counts = np.diff(np.append(starts, len(groups)))
    sums = np.add.reduceat(rows[:, order], starts, axis=1)
    return np.asarray((sums**2 / counts).sum(axis=1))


def _intraclass(ratio: float, lie: Layout) -> Effect:
    """Return the intraclass correlation by moments, with the interval of the F ratio."""
    from scipy.special import fdtri

    n0 = lie.weight / lie.df
    leak = max(lie.spread - lie.weight, 0.0) / lie.df_within

    def correlation(f: float) -> float:
        # F's expectation at σ_b²/σ² = q is (1 + n0 q) / (1 + leak q); q from f.
        q = (f - 1) / max(n0 - leak * f, 1e-9) if f * leak < n0 else np.inf
        return 1.0 if np.isinf(q) else float(max(q, -1 / (n0 + 1)) / (1 + max(q, -1 / (n0 + 1))))

    low = correlation(ratio / float(fdtri(lie.df, lie.df_within, 0.975)))
    high = correlation(ratio / float(fdtri(lie.df, lie.df_within, 0.025)))
    return Effect(name="intraclass correlation", value=correlation(ratio), low=low, high=high)
