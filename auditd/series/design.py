"""Rows of a baseline formula's design: treatment contrasts, logarithms and products; a constant first."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput
from auditd.formula import Variable, parse_formula
from auditd.plan import Plan
from auditd.records import Level


def design_rows(plan: Plan, cells: Sequence[Mapping[str, Level]]) -> NDArray[np.float64]:
    """Return the design, shape (n, p), of runs in the given cells.

    Numbers enter as they are, texts as indicators of the levels that `schedule.levels` names besides the
    first, in that order.

    Raises
    ------
    BadInput
        A text's levels are not in `schedule.levels`, or a logarithm is asked of what is not positive.
    """
    terms = parse_formula(plan.baseline.formula or "")
    parts = [np.ones((len(cells), 1))]
    for term in terms:
        columns = np.ones((len(cells), 1))
        for variable in term:
            found = _columns(plan, variable, cells)
            columns = (columns[:, :, None] * found[:, None, :]).reshape(len(cells), -1)
        parts.append(columns)
    return np.hstack(parts)


def _columns(plan: Plan, variable: Variable, cells: Sequence[Mapping[str, Level]]) -> NDArray[np.float64]:
    levels = [cell.get(variable.name) for cell in cells]
    stated = (plan.schedule.levels if plan.schedule else {}).get(variable.name)
    if all(
        isinstance(level, (int, float)) and not isinstance(level, bool)
        for level in [*levels, *(stated or [])]
    ):
        numbers = [float(level) for level in levels if isinstance(level, (int, float))]
        return np.array([_logged(variable, number) for number in numbers]).reshape(-1, 1)
    if not stated:
        raise BadInput(
            f"baseline.formula: the levels of {variable.name!r} are texts; name them in schedule.levels, "
            "so that the design is fixed before the first run"
        )
    return np.array([[float(level == other) for other in stated[1:]] for level in levels]).reshape(
        len(cells), -1
    )


def _logged(variable: Variable, number: float) -> float:
    if not variable.log:
        return number
    if number <= 0:
        raise BadInput(f"baseline.formula: log({variable.name}) of {number:g}; a logarithm needs more than 0")
    return math.log(number)
