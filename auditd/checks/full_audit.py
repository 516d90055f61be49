"""The full audit of a response: every check over every order, adjusted across what was asked of it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

import msgspec
import numpy as np

from auditd.checks.answer import LEVEL, Answer, Verdict
from auditd.checks.asked import not_testable
from auditd.checks.batch_one_way import BatchOneWay
from auditd.checks.check import Check
from auditd.checks.clock_daily_cycle import ClockDailyCycle
from auditd.checks.drift_mann_kendall import DriftMannKendall
from auditd.checks.drift_pettitt import DriftPettitt
from auditd.checks.drift_selected_shift import DriftSelectedShift
from auditd.checks.lineage_parent import LineageParent
from auditd.checks.orders import between, views, views_within
from auditd.checks.remarks import joined, tiny, with_serial_remarks
from auditd.checks.serial_ljung_box import SerialLjungBox
from auditd.checks.serial_von_neumann import SerialVonNeumann
from auditd.checks.shape_normality import ShapeNormality
from auditd.checks.shape_spread import ShapeSpread
from auditd.checks.view import View
from auditd.errors import BadInput, NotTestable
from auditd.series.table import Series

ALONG_ORDER: tuple[Check, ...] = (SerialVonNeumann(), SerialLjungBox(), DriftMannKendall(), DriftPettitt())
ALONG_OTHERS: tuple[Check, ...] = (SerialVonNeumann(), DriftMannKendall())
WITHIN_LEVELS: tuple[Check, ...] = (SerialVonNeumann(), DriftMannKendall(), DriftSelectedShift())
BETWEEN_LEVELS: tuple[Check, ...] = (BatchOneWay(),)
OF_TIMES: tuple[Check, ...] = (ClockDailyCycle(),)
OF_PARENTS: tuple[Check, ...] = (LineageParent(),)
OF_SHAPE: tuple[Check, ...] = (ShapeNormality(), ShapeSpread())
CHECKS: tuple[Check, ...] = (
    *ALONG_ORDER,
    DriftSelectedShift(),
    *BETWEEN_LEVELS,
    *OF_TIMES,
    *OF_PARENTS,
    *OF_SHAPE,
)
"""Every check of a response, each once."""


def audit_series(series: Series, *, margin: float | None = None) -> tuple[list[Answer], list[str]]:
    """Return every finding about a response, and sentences on what was not asked.

    Parameters
    ----------
    margin : smallest difference that matters, by the plan; effects within it are said to be tiny.
    """
    if len(series.values) == 0:
        return [], [f"{series.response}: no completed runs"]
    found_views, not_asked = views(series)
    within, not_within = views_within(found_views[0])
    asked = list(_questions(series, found_views, within))
    answers = adjusted([_asked(check, view) for check, view in asked])
    values = found_views[0].values
    spread = float(np.sqrt(values @ values / max(len(values) - len(np.unique(series.cells.codes)), 1)))
    remarked = [
        joined(answer, tiny(answer, check, spread=spread, margin=margin))
        for (check, _), answer in zip(asked, answers, strict=True)
    ]
    sentences = [f"{series.response}, {sentence}" for sentence in [*not_asked, *not_within]]
    return with_serial_remarks(remarked), sentences


def _questions(series: Series, found: list[View], within: list[View]) -> Iterator[tuple[Check, View]]:
    """Yield every check with every view that it is asked of."""
    first = found[0]
    timed = not np.isnan(series.started).all()
    yield from ((check, first) for check in ALONG_ORDER)
    yield from ((check, view) for view in found[1:] for check in ALONG_OTHERS)
    yield from ((check, view) for view in within for check in WITHIN_LEVELS)
    yield from ((check, view) for view in between(first) for check in BETWEEN_LEVELS)
    yield from ((check, view) for view in (first, *within) for check in OF_TIMES if timed)
    yield from ((check, first) for check in OF_PARENTS if series.parents is not None)
    yield from ((check, first) for check in OF_SHAPE)


def _asked(check: Check, view: View) -> Answer:
    """Ask, or say why it cannot be asked."""
    if check.needs_order and view.why_not is not None:
        return not_testable(check, view, view.why_not)
    if view.n < check.n_min:
        return not_testable(check, view, f"needs {check.n_min} runs, got {view.n}")
    if not np.any(view.scores):
        return not_testable(check, view, "results are constant within every cell, or one run a cell")
    try:
        return check.ask(view)
    except NotTestable as error:
        return not_testable(check, view, f"needs {error.required}, got {error.got}")
    except BadInput as error:
        return not_testable(check, view, str(error))


def adjusted(answers: Sequence[Answer]) -> list[Answer]:
    """Return the answers with Holm's adjusted p-values within each family, and their verdicts.

    Source: Holm (1979), Scandinavian Journal of Statistics 6:65-70.
    """
    found = list(answers)
    for family in ("dependence", "design", "shape"):
        asked = [k for k, one in enumerate(found) if one.family == family and one.pvalue is not None]
        for k, pvalue in zip(asked, holm([found[k].pvalue or 0.0 for k in asked]), strict=True):
            found_it: Verdict = "departure" if family == "shape" else "dependence"
            verdict: Verdict = found_it if pvalue <= LEVEL else "no evidence"
            found[k] = msgspec.structs.replace(found[k], adjusted_pvalue=pvalue, verdict=verdict)
    return found


def holm(pvalues: Iterable[float]) -> list[float]:
    """Return Holm's step-down adjusted p-values, in the order given."""
    raw = np.array(list(pvalues), dtype=np.float64)
    if raw.size == 0:
        return []
    order = np.argsort(raw, kind="stable")
    steps = np.maximum.accumulate(raw[order] * (raw.size - np.arange(raw.size)))
    found = np.empty_like(raw)
    found[order] = np.minimum(steps, 1.0)
    return [float(value) for value in found]
