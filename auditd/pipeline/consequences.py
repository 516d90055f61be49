"""What a finding costs the comparisons: its evidence loss, and the grade that follows."""

from __future__ import annotations

from auditd.errors import BadInput, NotTestable
from auditd.pipeline.circumstances import circumstances
from auditd.pipeline.comparing import Question, losses, planned_questions, touches
from auditd.pipeline.redating import affected_runs
from auditd.plan import AUTO_RESPONSES, Plan
from auditd.records import GRADES, Finding, Grade
from auditd.series.table import RunTable
from auditd.verdicts.cautions import Consequence
from auditd.verdicts.grades import grade

BY_LOSS = ("serial", "drift", "batch", "spread", "clock", "lineage")


def consequence_of(finding: Finding, table: RunTable, plan: Plan) -> tuple[Consequence, float | None]:
    """Return a finding's consequence and the lower bound of its evidence loss; None where there is none."""
    if finding.kind not in BY_LOSS or finding.response is None:
        return Consequence(), None
    compared = [one for _, one in losses(table, plan, finding.response) if one is not None and one.estimable]
    stated = [one for one in compared if one.loss is not None]
    by_cells = None if stated else _of_cells(finding.response, table, plan)
    if stated:
        loss = max(one.loss for one in stated)
        low = max(one.loss_low or 0.0 for one in stated)
        n_lost = max(max(one.n - (one.n_effective or 0.0), 0.0) for one in stated)
    elif by_cells is not None:
        n_lost, loss, low = by_cells
    else:
        return Consequence(n_cells=len(table.cells.levels)), None
    return (
        _consequence(finding, table, plan, min(max(float(loss), 0.0), 1.0), n_lost),
        min(max(float(low or 0.0), 0.0), 1.0),
    )


def _consequence(
    finding: Finding, table: RunTable, plan: Plan, loss: float, n_lost: float | None
) -> Consequence:
    """Return what is to be repeated: never more runs than the finding is about, in blocks that fit them."""
    n_cells = len(finding.cells) or max(len(table.cells.levels), 1)
    along = table.nuisance.get(finding.along or "")
    n_levels = 1 if along is None else max(len(along.levels), 1)
    if n_lost is not None:
        n_lost = min(n_lost, float(affected_runs(finding, table, plan)))
        n_levels = max(min(n_levels, int(n_lost // n_cells)), 1)
    return Consequence(loss=loss, n_lost=n_lost, n_cells=n_cells, n_levels=n_levels)


def _of_cells(response: str, table: RunTable, plan: Plan) -> tuple[float, float, float] | None:
    """Return the effective runs lost, the loss of the cells' means, and its lower bound."""
    from auditd.evidence import effective_number

    series = table.series(plan, response)
    try:
        found = effective_number(series.values, **circumstances(table, series))
    except (NotTestable, BadInput):
        return None
    return max(found.n - found.n_effective, 0.0), found.loss, found.loss_low


def grade_of(finding: Finding, table: RunTable, plan: Plan, loss_low: float | None) -> Grade:
    """Return a finding's grade, by what it does to the planned comparisons."""
    planned = planned_questions(plan)
    if finding.response is not None:
        planned = [one for one in planned if one.response == finding.response]
    touched = [one for one in planned if _is_touched(one, finding, table, plan)]
    estimable = True
    if finding.kind in {*BY_LOSS, "confound"}:
        for response in {one.response for one in touched}:
            found = [one for question, one in losses(table, plan, response) if question in touched]
            estimable = estimable and all(one is None or one.estimable for one in found)
    graded = grade(
        finding,
        loss_low=loss_low,
        touches_planned=bool(touched),
        estimable=estimable,
        beyond_margin=_beyond_margin(finding, plan),
    )
    return _capped(graded, finding) if finding.response in AUTO_RESPONSES and not touched else graded


def _capped(found: Grade, finding: Finding) -> Grade:
    """Grade an automatic response that no comparison is about: material at most, a note without an effect."""
    effect = finding.effect
    if (
        effect is not None
        and effect.low is not None
        and effect.high is not None
        and effect.low <= 0 <= effect.high
    ):
        return "note"
    return min(found, "material", key=GRADES.index)


def _is_touched(question: Question, finding: Finding, table: RunTable, plan: Plan) -> bool:
    """Whether a finding is about a comparison: by its cells, else by the factor that it is along."""
    if finding.cells:
        return touches(question, finding.cells, table)
    return finding.along not in plan.factors or finding.along in {*question.a, *question.b}


def _beyond_margin(finding: Finding, plan: Plan) -> bool:
    """Whether a shift is certain to be larger than the smallest difference that matters."""
    response = plan.responses.get(finding.response or "")
    effect = finding.effect
    if response is None or response.margin is None or effect is None or finding.kind != "drift":
        return False
    if effect.low is None or effect.high is None:
        return False
    return effect.low > response.margin or effect.high < -response.margin
