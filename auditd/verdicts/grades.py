"""How grave a finding is: by what it costs the planned comparisons, not by how certain it is."""

from __future__ import annotations

import msgspec

from auditd.records import GRADES, Finding, Grade

MATERIAL_LOSS = 0.10
"""Evidence loss (share of the runs' worth) from which a warning is material."""
SEVERE_LOSS = 0.50
"""Evidence loss above which a warning is severe."""
N_HOLD_RUNS = 50
"""Runs for which the bound must have stayed below before a grade falls, so that it does not flutter."""

ALWAYS_MATERIAL = ("silence", "plan", "rewrite", "gap", "time", "seed", "lineage")
"""Kinds graded without an evidence loss."""
BY_COMPARISON = ("failure", "cap", "confound", "order")
"""Kinds that are severe when a planned comparison is touched, else material."""


def grade(
    finding: Finding,
    *,
    loss_low: float | None = None,
    touches_planned: bool = False,
    estimable: bool = True,
    beyond_margin: bool = False,
) -> Grade:
    """Return the grade of a finding.

    Parameters
    ----------
    finding : what was found.
    loss_low : lower confidence bound of the largest evidence loss among the planned comparisons of its
        response (without comparisons: among its cells' means), 0 to 1; None where none can be given.
    touches_planned : whether a planned comparison has a cell that the finding is about.
    estimable : whether every planned comparison that it touches can still be estimated.
    beyond_margin : whether the effect found is certain to exceed the response's margin.

    A dependence that sequential or offline checks found, and for which no loss can be given yet, is
    `material`: it is certain, and its cost is not known to be small. Facts of `BY_LOSS` kind `lineage`
    have a loss when they come from the sequential audit; the fact itself has none.
    """
    if not estimable:
        return "severe"
    if finding.kind in BY_COMPARISON:
        return "severe" if touches_planned else "material"
    if finding.kind == "repeat":
        return graded_share(finding.share or 0.0)
    if finding.kind in ALWAYS_MATERIAL and loss_low is None:
        return "material"
    if loss_low is None:
        return "material"
    by_loss = graded_share(loss_low)
    return "material" if beyond_margin and by_loss == "note" else by_loss


def graded_share(share: float) -> Grade:
    """Return the grade of a share of the runs' worth that is lost, or of runs that are repeated."""
    if share > SEVERE_LOSS:
        return "severe"
    return "material" if share >= MATERIAL_LOSS else "note"


class GradeHold(msgspec.Struct, kw_only=True):
    """A warning's grade over time: it rises at once, and falls when it has stayed below for 50 runs.

    Plain data, so that it is kept with the warning: `held` is the grade shown, `since` says for each grade
    from which position on the observed grade has been at or below it, -1 where it is above.
    """

    held: Grade = "note"
    since: list[int] = msgspec.field(default_factory=lambda: [-1, -1, -1])

    def observe(self, position: int, observed: Grade) -> Grade:
        """Take the grade that holds at a position (runs audited so far) and return the grade to show."""
        level = GRADES.index(observed)
        for rank in range(len(GRADES)):
            if rank < level:
                self.since[rank] = -1
            elif self.since[rank] < 0:
                self.since[rank] = position
        held = GRADES.index(self.held)
        stayed = (r for r in range(held) if self.since[r] >= 0 and position - self.since[r] >= N_HOLD_RUNS)
        self.held = GRADES[max(level, next(stayed, held))]
        return self.held
