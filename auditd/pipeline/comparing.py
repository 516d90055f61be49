"""Comparisons of two groups of cells: matched, computed, and put into words."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import msgspec
import numpy as np

from auditd.checks.duplicates import duplicate_groups
from auditd.errors import BadInput, NotTestable
from auditd.pipeline.asking import Document
from auditd.pipeline.circumstances import labelled_nuisance
from auditd.plan import AUTO_RESPONSES, Plan, cells_matching
from auditd.records import Level, cell_label, normal_level
from auditd.series.load import response_names
from auditd.series.table import Flags, Ints, RunTable, Series

Group = dict[str, Level]


class Question(msgspec.Struct, frozen=True, kw_only=True):
    """A comparison to be made: of one response, b against a."""

    response: str
    a: Group
    b: Group
    planned: bool


def planned_questions(plan: Plan) -> list[Question]:
    """Return the plan's comparisons."""
    return [
        Question(
            response=one.response,
            a={name: normal_level(level) for name, level in one.between[0].items()},
            b={name: normal_level(level) for name, level in one.between[1].items()},
            planned=True,
        )
        for one in plan.comparisons
    ]


def questions_of(plan: Plan, a: str, b: str) -> list[Question]:
    """Return the comparison of two groups, written `solver=implicit`, for every response of the plan."""
    left, right = (group_of(plan, text) for text in (a, b))
    planned = planned_questions(plan)
    found = []
    for response in plan.responses:
        known = any(one.response == response and (one.a, one.b) == (left, right) for one in planned)
        found.append(Question(response=response, a=left, b=right, planned=known))
    return found


def group_of(plan: Plan, text: str) -> Group:
    """Return a group of cells written as `solver=implicit`, or `solver=implicit,mesh=fine`.

    Raises
    ------
    BadInput
        It is not of that form, or names what is no factor.
    """
    group: Group = {}
    for part in text.split(","):
        name, sign, level = part.partition("=")
        if not sign or name not in plan.factors:
            raise BadInput(f"{part!r}: write factor=level; factors: {', '.join(plan.factors) or 'none'}")
        group[name] = _level(level)
    return group


def _level(text: str) -> Level:
    """Return a level written on a command line: JSON where it is a number, true or false, else a text."""
    try:
        value = msgspec.json.decode(text)
    except msgspec.DecodeError:
        return text
    return normal_level(value)


def matched_cells(table: RunTable, question: Question) -> tuple[list[str], list[str]]:
    """Return the labels of both sides' cells, matched by the factors that the question does not name."""
    named = {*question.a, *question.b}
    sides: list[dict[str, str]] = []
    for group in (question.a, question.b):
        rest = {}
        for cell in table.cell_values:
            if cells_matching(group, dict(cell)):
                key = cell_label({name: level for name, level in cell.items() if name not in named})
                rest[key] = cell_label(dict(cell))
        sides.append(rest)
    both = [key for key in sides[0] if key in sides[1]]
    if not both:
        return list(sides[0].values()), list(sides[1].values())
    return [sides[0][key] for key in both], [sides[1][key] for key in both]


def compare_document(
    table: RunTable, plan: Plan, questions: Sequence[Question], *, with_set_aside: bool = False
) -> list[Document]:
    """Return the comparisons as `compare --json` shows them."""
    n_planned = max(len(plan.comparisons), 1)
    return [_compared(table, plan, one, n_planned, with_set_aside=with_set_aside) for one in questions]


def _compared(
    table: RunTable, plan: Plan, question: Question, n_planned: int, *, with_set_aside: bool
) -> Document:
    level = plan.campaign.confidence
    confidence = 1 - (1 - level) / n_planned if question.planned else level
    try:
        found = _with_repeats_once(table, plan, question, confidence, with_set_aside=with_set_aside)
    except NotTestable as error:
        return _without_answer(question, f"not testable: needs {error.required}, got {error.got}")
    except BadInput as error:
        return _without_answer(question, str(error))
    return _document(question, plan, found)


def contrast_of(
    table: RunTable, plan: Plan, question: Question, confidence: float, *, with_set_aside: bool = False
) -> Any:  # evidence.Contrast; imported where it is used, since it loads slowly
    """Return the honest contrast of a question.

    Raises
    ------
    NotTestable, BadInput
        As `evidence.contrast`, and when a side has no runs.
    """
    from auditd.evidence import contrast

    if question.response not in response_names(plan):
        raise BadInput(f"no response {question.response!r}; known: {', '.join(response_names(plan))}")
    a, b = matched_cells(table, question)
    series = table.series(plan, question.response, with_set_aside=with_set_aside)
    present = {series.cells.levels[code] for code in np.unique(series.cells.codes)}
    for side, cells in ((question.a, a), (question.b, b)):
        if not present & set(cells):
            raise NotTestable(f"completed runs of {cell_label(side)}", "none")
    return contrast(
        series.values,
        cells=series.cells.labels(),
        a=a,
        b=b,
        nuisance=labelled_nuisance(series),
        blocks=_blocks(series) if plan.seeds.role == "block" else None,
        confidence=confidence,
        ordered=series.ordered,
    )


def _with_repeats_once(
    table: RunTable, plan: Plan, question: Question, confidence: float, *, with_set_aside: bool
) -> Any:  # evidence.Contrast
    """Return the contrast in which equal results of a cell count once, beside all runs' naive interval."""
    from dataclasses import replace

    every = contrast_of(table, plan, question, confidence, with_set_aside=with_set_aside)
    usable = table.usable(plan, question.response, with_set_aside=with_set_aside)
    repeats = usable & _repeats(table)
    sides = matched_cells(table, question)
    n_repeats = sum(int(counts.sum()) for counts in _counts(table, repeats, sides))
    if n_repeats == 0 or question.response in AUTO_RESPONSES:
        return every
    once = replace(table, completed=table.completed & ~repeats)
    found = contrast_of(once, plan, question, confidence, with_set_aside=with_set_aside)
    kept = _variance(_counts(table, usable, sides)) / _variance(_counts(table, usable & ~repeats, sides))
    told = f"{n_repeats} runs repeat a result of their cell to the last digit and count once; replace them"
    losses_kept = {
        name: None if loss is None else 1 - (1 - loss) * kept
        for name, loss in ((name, getattr(found, name)) for name in ("loss", "loss_low", "loss_high"))
    }
    return replace(
        found,
        n=every.n,
        n_effective=None if found.n_effective is None else found.n_effective / found.n * kept * every.n,
        naive_low=every.naive_low,
        naive_high=every.naive_high,
        remarks=(*found.remarks, told),
        **losses_kept,
    )


def _counts(table: RunTable, flags: Flags, sides: tuple[list[str], list[str]]) -> list[Ints]:
    """Return how many of the flagged runs each cell of either side has."""
    counts = np.bincount(table.cells.codes[flags], minlength=len(table.cells.levels))
    return [counts[[table.cells.levels.index(label) for label in side]] for side in sides]


def _variance(counts: list[Ints]) -> float:
    """Return the variance, in that of a run, of a difference of sides in which cells weigh equally."""
    return sum(float((1 / side[side > 0]).sum()) / int((side > 0).sum()) ** 2 for side in counts)


def _repeats(table: RunTable) -> Flags:
    """Return which runs repeat the result of an earlier run of their cell, shape (n,)."""
    both = np.column_stack((duplicate_groups(table), table.cells.codes))
    _, first = np.unique(both, axis=0, return_index=True)
    repeats = np.ones(table.n, dtype=bool)
    repeats[first] = False
    return repeats


def _blocks(series: Series) -> Any:  # an array of labels, or None
    if series.seeds is None or (series.seeds.codes < 0).any():
        return None
    return series.seeds.labels()


_NUMBERS = (
    "estimate", "low", "high", "low_any", "high_any", "naive_low", "naive_high", "n", "n_effective",
    "estimable", "reason", "method", "hedges_g", "g_low", "g_high", "df", "loss", "loss_low", "loss_high",
    "confidence", "weak",
)  # fmt: skip


def _document(question: Question, plan: Plan, found: Any) -> Document:  # evidence.Contrast
    from auditd.evidence import runs_needed, verdict

    response = plan.responses.get(question.response)
    margin = None if response is None else response.margin
    decided = None if margin is None or not found.estimable else verdict(found, margin)
    needed = runs_needed(found, margin) if decided == "undecided" and margin is not None else None
    limited_by = found.floor_of if decided == "undecided" and needed is None else None
    further = [f"more levels of {limited_by}, not more runs, would decide"] if limited_by else []
    document = _head(question) | {name: getattr(found, name) for name in _NUMBERS}
    document |= {
        "margin": margin,
        "unit": None if response is None else response.unit,
        "scale": "linear" if response is None else response.scale,
        "verdict": decided,
        "runs_needed": needed,
        "remarks": [*found.remarks, *further],
    }
    document["sentence"] = sentence(document, limited_by)
    return document


def _without_answer(question: Question, reason: str) -> Document:
    document: Document = _head(question) | dict.fromkeys(_NUMBERS)
    document |= {
        "estimable": False,
        "reason": reason,
        "margin": None,
        "verdict": None,
        "runs_needed": None,
        "remarks": [],
    }
    document["sentence"] = sentence(document)
    return document


def _head(question: Question) -> Document:
    return {
        "response": question.response,
        "a": cell_label(question.a),
        "b": cell_label(question.b),
        "planned": question.planned,
    }


def sentence(document: Document, limited_by: str | None = None) -> str:
    """Return what the difference between the naive and the honest result means, in one sentence.

    `limited_by` names the nuisance whose levels differ so much that no number of runs on them decides.
    """
    if not document["estimable"]:
        return f"This comparison cannot be estimated: {document['reason']}."
    n, worth = document["n"], document["n_effective"]
    honest = document["high"] - document["low"]
    naive = document["naive_high"] - document["naive_low"]
    ratio = honest / naive if naive else 1.0
    if ratio > 1.1:
        why = (
            f"{n} runs are worth {worth:.0f} here"
            if worth < 0.95 * n
            else f"it takes {n} runs for that many independent ones, while only {document['df']:.3g} degrees "
            "of freedom tell how far levels differ"
        )
        text = f"The naive interval is too narrow: {why}; the honest one is {ratio:.1f} times as wide"
    elif ratio < 0.9:
        text = (
            f"The honest interval is {ratio:.2f} times the naive one: order or blocks take out "
            f"what the {n} runs share"
        )
    else:
        text = f"Naive and honest interval agree: {n} runs are worth {min(worth, n):.0f}"
    return text + _judged(document, limited_by) + "."


def _judged(document: Document, limited_by: str | None) -> str:
    weak = "; it rests on fewer than 10 effective runs a side and is weak" if document["weak"] else ""
    if document["margin"] is None or document["verdict"] is None:
        return weak
    small = document["verdict"] == "within the margin" and not document["low"] <= 0 <= document["high"]
    tiny = " (certainly not zero, and certainly too small to matter)" if small else ""
    margin = f"the margin of {document['margin']:g}"
    if document["verdict"] == "undecided":
        needed = document["runs_needed"]
        more = f"; about {needed:,} more runs would decide" if needed else ""
        if limited_by:
            more = f"; more levels of {limited_by}, not more runs, would decide"
        return f"; whether the difference exceeds {margin} is undecided{more}{weak}"
    return f"; the difference is {document['verdict']} of {document['margin']:g}{tiny}{weak}"


def losses(table: RunTable, plan: Plan, response: str) -> list[tuple[Question, Any]]:
    """Return each planned comparison of a response with its contrast, or None where it has none."""
    found = []
    for question in planned_questions(plan):
        if question.response != response:
            continue
        try:
            found.append((question, contrast_of(table, plan, question, plan.campaign.confidence)))
        except (NotTestable, BadInput):
            found.append((question, None))
    return found


def touches(question: Question, cells: Iterable[str], table: RunTable) -> bool:
    """Whether a comparison has one of the cells on one of its sides."""
    a, b = matched_cells(table, question)
    return bool({*a, *b} & set(cells))
