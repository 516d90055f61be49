"""Since when, in the campaign's own runs: the last before, the first after, and what else changed."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np

from auditd.records import Finding
from auditd.series.table import Flags, Ints, RunTable
from auditd.verdicts.moments import Change, Dated, Moment

N_LEVELS_MAX = 200
"""A nuisance with more levels than this changes too often for one of them to be named as a cause."""
LONG_GAP = 3.0
"""A gap is told when it is so many times the distance that 95 % of the runs keep."""
GAP_MIN_S = 3600.0
"""A gap shorter than an hour is not told: it does not change what an operator would look at."""


def dated(finding: Finding, table: RunTable) -> Dated | None:
    """Return when a finding began, by the runs that it is about."""
    if finding.since is None:
        return None
    about = _about(finding, table)
    at = int(np.searchsorted(table.positions[about], finding.since))
    if len(about) == 0:
        return None
    before = about[at - 1] if at > 0 else None
    after = about[min(at, len(about) - 1)]
    return Dated(
        last_before=None if before is None else _moment(table, before),
        first_after=_moment(table, after),
        earliest=_moment_at(table, about, finding.since_low),
        latest=_moment_at(table, about, finding.since_high),
        gap=before is not None and _is_gap(table, about, int(before), int(after)),
    )


def changes(table: RunTable) -> list[Change]:
    """Return the first appearances of nuisance levels, in the campaign and within levels of the others."""
    placed = np.flatnonzero(table.positions >= 0)
    placed = placed[np.argsort(table.positions[placed])]
    found: list[Change] = []
    for name, coded in table.nuisance.items():
        if len(coded.levels) > N_LEVELS_MAX:
            continue
        found += _first_runs(table, placed, name)
        for other, within in table.nuisance.items():
            if other == name or len(within.levels) > N_LEVELS_MAX:
                continue
            for code, level in enumerate(within.levels):
                of_level = placed[within.codes[placed] == code]
                found += _first_runs(table, of_level, name, (other, level))
    return found


def _first_runs(
    table: RunTable, rows: Ints, name: str, within: tuple[str, str] | None = None
) -> list[Change]:
    coded = table.nuisance[name]
    codes, first = np.unique(coded.codes[rows], return_index=True)
    found = [
        Change(nuisance=name, level=coded.levels[code], moment=_moment(table, rows[at]), within=within)
        for code, at in zip(codes.tolist(), first.tolist(), strict=True)
        if within is None or at > 0
    ]
    return found if within is None or len(codes) > 1 else []


def _about(finding: Finding, table: RunTable) -> Ints:
    """Return the placed runs that a finding is about, in the order of places."""
    flags: Flags = table.positions >= 0
    coded = table.nuisance.get(finding.along or "")
    if coded is not None and finding.level in coded.levels:
        flags = flags & (coded.codes == coded.levels.index(finding.level))
    rows = np.flatnonzero(flags)
    return rows[np.argsort(table.positions[rows])]


def _moment_at(table: RunTable, about: Ints, position: int | None) -> Moment | None:
    if position is None:
        return None
    at = min(int(np.searchsorted(table.positions[about], position)), len(about) - 1)
    return _moment(table, about[at])


def _moment(table: RunTable, row: int | np.integer) -> Moment:
    started = float(table.started[row])
    return Moment(
        run=str(table.ids[row]),
        position=int(table.positions[row]),
        at=None if np.isnan(started) else datetime.fromtimestamp(started, UTC),
    )


def _is_gap(table: RunTable, about: Ints, before: int, after: int) -> bool:
    times = table.started[about]
    steps = np.diff(times[~np.isnan(times)])
    between = table.started[after] - table.started[before]
    if len(steps) == 0 or np.isnan(between):
        return False
    return bool(between > GAP_MIN_S and between > LONG_GAP * max(float(np.quantile(steps, 0.95)), 0.0))
