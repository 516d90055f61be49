"""A run chart in plain characters: 80 columns, over ssh, without colour."""

from __future__ import annotations

from typing import Any

N_ROWS = 11
"""Rows of a chart; the middle one is the cells' own levels."""


def chart_lines(strip: dict[str, Any], *, since: int | None, raised: int | None) -> list[str]:
    """Return a chart of a strip: bins' means as `o`, their ranges as `|`, and marks below.

    Parameters
    ----------
    strip : as `series.strips.strip` makes it.
    since, raised : positions marked by `^` and `W`, where they lie in the chart.
    """
    low, high = min(strip["low"]), max(strip["high"])
    bound = max(abs(low), abs(high)) or 1.0
    rows = [[" "] * len(strip["mean"]) for _ in range(N_ROWS)]
    for column, (mean, bottom, top) in enumerate(
        zip(strip["mean"], strip["low"], strip["high"], strict=True)
    ):
        for row in range(_row(top, bound), _row(bottom, bound) + 1):
            rows[row][column] = "|"
        rows[_row(mean, bound)][column] = "o"
    labels = {0: f"{bound:+.3g}", N_ROWS // 2: "0", N_ROWS - 1: f"{-bound:+.3g}"}
    lines = [f"    {labels.get(number, ''):>9} {''.join(row)}" for number, row in enumerate(rows)]
    marks = [" "] * len(strip["mean"])
    for position, sign in ((since, "^"), (raised, "W")):
        place = _column(position, strip)
        if place is not None:
            marks[place] = sign
    lines.append(f"    {'':>9} {''.join(marks)}".rstrip())
    lines.append(f"    {'':>9} positions {strip['first']} to {strip['last']}, less the cells' own levels")
    lines.append(f"    {'':>9} o mean, | range, ^ since, W raised")
    return lines


def _row(value: float, bound: float) -> int:
    return round((1 - value / bound) / 2 * (N_ROWS - 1))


def _column(position: int | None, strip: dict[str, Any]) -> int | None:
    if position is None or not strip["first"] <= position <= strip["last"]:
        return None
    span = max(strip["last"] - strip["first"], 1)
    return min(int((position - strip["first"]) / span * len(strip["mean"])), len(strip["mean"]) - 1)
