"""An e-process in plain characters: when the evidence arose, against its threshold."""

from __future__ import annotations

import math
from collections.abc import Sequence

N_COLUMNS = 60
N_ROWS = 7
LN_10 = math.log(10.0)


def evidence_lines(
    highest: Sequence[float], *, first: int, width: int, threshold: float, raised: int | None
) -> list[str]:
    """Return a chart of an e-process, 80 columns wide.

    Parameters
    ----------
    highest : highest natural log e-value of each stretch of `width` runs, the first at position `first`.
    threshold : natural log of what raises a warning, drawn as `-`.
    raised : position of the warning, marked by `W`.
    """
    if not highest:
        return []
    per = math.ceil(len(highest) / N_COLUMNS)
    columns = [max(highest[k : k + per]) / LN_10 for k in range(0, len(highest), per)]
    level = threshold / LN_10
    top, bottom = max(*columns, level, 1.0), 0.0
    rows = [[" "] * len(columns) for _ in range(N_ROWS)]
    rows[_row(level, top)] = ["-"] * len(columns)
    for column, value in enumerate(columns):
        if value > bottom:
            for row in range(_row(value, top), N_ROWS):
                rows[row][column] = "#"
    labels = {0: f"{top:.3g}", _row(level, top): f"{level:.3g}", N_ROWS - 1: "0"}
    lines = [f"    {labels.get(number, ''):>9} {''.join(row)}" for number, row in enumerate(rows)]
    if raised is not None and first <= raised < first + width * len(highest):
        lines.append(f"    {'':>9} {' ' * ((raised - first) // (width * per))}W")
    lines.append(f"    {'':>9} # log10 of the evidence, - what it needs alone, W raised")
    return lines


def _row(value: float, top: float) -> int:
    return round((1 - min(max(value / top, 0.0), 1.0)) * (N_ROWS - 1))
