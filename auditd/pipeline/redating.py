"""What a dependence looks like once more runs have come: where the step is, and which cells it touches.

An alarm is dated when it is raised, from few runs; a larger change on the same level later raises no second
alarm. So dates and cells are read off all runs by now, cell by cell.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import msgspec
import numpy as np

from auditd.plan import Plan
from auditd.records import Finding
from auditd.series.table import Flags, Floats, Ints, RunTable, Series

N_CELL_MIN = 20
"""Runs of a cell on the level from which its step is sought."""
N_SIDE_MIN = 3
"""Runs on each side of a step."""
DISTINCT_SHARE = 0.25
"""A cell that gives the same results again and again has steps of its own; it dates nothing."""
STEP_SHARE = 0.5
"""A step is taken for what happened when it explains more of a cell's variance on the level than this …"""
DATE_SHARE = 0.25
"""… and a warning that is a drift already is dated by one that explains more than this …"""
LIKELIHOOD_MIN = 20.0
"""… if twice its log likelihood ratio exceeds this and what choosing the best of n splits adds, 2 log n."""
CHI_SQUARED_95 = 3.8415
"""95 % point of chi-squared with one degree of freedom: splits within it of the best are not excluded."""
N_RISES = 40
"""Starts of a slow rise that are tried, evenly spaced."""
TOUCHED_SD = 0.2
"""Shift, in standard deviations within the cell, from which a cell is touched where no margin is stated."""
STEPPING = ("drift", "serial", "batch", "spread")


class Step(NamedTuple):
    """A cell's best split: row numbers into the level's runs, and the share of variance it explains."""

    share: float
    since: int
    low: int
    high: int


def seen_anew(finding: Finding, table: RunTable, plan: Plan) -> Finding:
    """Return the finding with the step and the cells that all runs by now show, where they show one."""
    if finding.kind not in STEPPING or finding.response is None or finding.along is None:
        return finding
    series = table.series(plan, finding.response)
    about = _about(finding, series)
    steps = {
        code: step
        for code in np.unique(series.cells.codes[about]).tolist()
        if (step := _step(series, about, code))
    }
    cells = _touched(finding, series, about, plan)
    found = msgspec.structs.replace(finding, cells=cells)
    least = DATE_SHARE if finding.kind == "drift" else STEP_SHARE
    strong = [step for step in steps.values() if step.share > least]
    if not strong:
        return found
    best = max(strong, key=lambda step: step.share)
    return msgspec.structs.replace(
        found, kind="drift", since=best.since, since_low=best.low, since_high=best.high
    )


def _about(finding: Finding, series: Series) -> Flags:
    flags: Flags = series.positions >= 0
    coded = series.nuisance.get(finding.along or "")
    if coded is not None and finding.level in coded.levels:
        flags = flags & (coded.codes == coded.levels.index(finding.level))
    return flags


def _step(series: Series, about: Flags, code: int) -> Step | None:
    """Return the two-segment split of a cell's runs with the smallest residual sum of squares."""
    rows = np.flatnonzero(about & (series.cells.codes == code))
    rows = rows[np.argsort(series.positions[rows])]
    if len(rows) < N_CELL_MIN:
        return None
    y = series.values[rows] - series.values[rows].mean()
    whole = float(y @ y)
    n = len(y)
    if whole <= 0 or len(np.unique(y)) < n * DISTINCT_SHARE:
        return None
    sizes = np.arange(N_SIDE_MIN, n - N_SIDE_MIN + 1)
    sums = np.cumsum(y)[sizes - 1]
    explained = sums**2 * (1 / sizes + 1 / (n - sizes))
    rest = np.maximum(whole - explained, whole * 1e-12)
    best = int(np.argmin(rest))
    if -n * math.log1p(-min(float(explained[best] / whole), 1 - 1e-12)) < LIKELIHOOD_MIN + 2 * math.log(n):
        return None
    if explained[best] <= _by_rise(y):
        return None  # a slow rise, whose middle is not when it began
    kept = sizes[n * np.log(rest / rest[best]) <= CHI_SQUARED_95]
    positions = series.positions[rows]
    return Step(
        float(explained[best] / whole),
        int(positions[sizes[best]]),
        int(positions[kept.min()]),
        int(positions[kept.max()]),
    )


def _by_rise(y: Floats) -> float:
    """Return the most that a level, then a straight rise, explains of centred values: a sum of squares."""
    order = np.arange(len(y), dtype=np.float64)
    most = 0.0
    for start in np.linspace(0, len(y) - 2 * N_SIDE_MIN, N_RISES):
        rise = np.maximum(order - start, 0.0)
        rise -= rise.mean()
        most = max(most, float(rise @ y) ** 2 / float(rise @ rise))
    return most


def _touched(finding: Finding, series: Series, about: Flags, plan: Plan) -> tuple[str, ...]:
    """Return the cells whose runs on the level differ from their others by more than the margin.

    Empty where every cell is touched, or none can be told.
    """
    if finding.level is None:
        return ()
    response = plan.responses.get(finding.response or "")
    margin = None if response is None else response.margin
    others = ~about & (series.positions >= 0)
    found, judged = [], 0
    for code in np.unique(series.cells.codes).tolist():
        of_cell = series.cells.codes == code
        inside, outside = series.values[of_cell & about], series.values[of_cell & others]
        if min(len(inside), len(outside)) < N_SIDE_MIN:
            continue
        judged += 1
        if _differs(inside, outside, margin):
            found.append(series.cells.levels[code])
    return tuple(found) if 0 < len(found) < judged else ()


def _differs(inside: Floats, outside: Floats, margin: float | None) -> bool:
    spread = math.sqrt((float(inside.var(ddof=1)) + float(outside.var(ddof=1))) / 2)
    bound = TOUCHED_SD * spread if margin is None else margin
    shift = float(inside.mean() - outside.mean())
    error = math.sqrt(float(inside.var(ddof=1)) / len(inside) + float(outside.var(ddof=1)) / len(outside))
    return abs(shift) + 2 * error > bound


def not_before_its_level(finding: Finding, table: RunTable) -> Finding:
    """Return a finding on a level dated no earlier than the level's first run."""
    coded = table.nuisance.get(finding.along or "")
    if coded is None or finding.level not in coded.levels or finding.since is None:
        return finding
    on_level = table.positions[(coded.codes == coded.levels.index(finding.level)) & (table.positions >= 0)]
    if len(on_level) == 0:
        return finding
    first = int(on_level.min())
    return msgspec.structs.replace(
        finding,
        since=max(finding.since, first),
        since_low=max(finding.since_low or 0, first),
        since_high=max(finding.since_high or 0, first),
    )


def affected_runs(finding: Finding, table: RunTable, plan: Plan) -> int:
    """Return how many runs a finding is about: those of its level and cells since it began."""
    if finding.response is None:
        return table.n
    series = table.series(plan, finding.response)
    about = _about(finding, series)
    if finding.since is not None and finding.kind != "batch":
        about = about & (series.positions >= finding.since)
    if finding.cells:
        wanted: Ints = np.array(
            [series.cells.levels.index(c) for c in finding.cells if c in series.cells.levels]
        )
        about = about & np.isin(series.cells.codes, wanted)
    return int(about.sum())
