"""The effect that a sequential finding shows, on the audited scale, from the runs since it began.

At an alarm an effect is inflated, since the alarm chose its moment; as soon as 30 runs have come after it,
they alone are used.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import NamedTuple

import numpy as np

from auditd.errors import BadInput, NotTestable
from auditd.plan import Plan
from auditd.records import Effect, Finding
from auditd.sequential import Effect as Estimate
from auditd.sequential import effect
from auditd.series.table import Flags, Floats, RunTable, Series

N_AFTER = 30
"""Runs after the alarm from which they alone are used."""
N_LEAST = effect.N_RUNS_MIN
"""Runs below which no effect is given."""
DAY_S = 86_400.0


class _Part(NamedTuple):
    """The residuals that a finding is about: those before it began, and those since."""

    series: Series
    residuals: Floats
    about: Flags
    before: Flags
    since: Flags
    confidence: float

    def chosen(self, which: Flags) -> Floats:
        return self.residuals[which & self.about]


def effect_of(finding: Finding, table: RunTable, plan: Plan) -> Effect | None:
    """Return the effect with its interval, or None where there are too few runs."""
    if finding.response is None or finding.since is None or finding.index is None:
        return None
    series = table.series(plan, finding.response)
    if len(series.values) < N_LEAST:
        return None
    part = _part(finding, series, plan.campaign.confidence)
    try:
        found = _ESTIMATES[finding.kind](finding, part)
    except (NotTestable, BadInput):
        return None
    return Effect(name=found.name, value=found.value, low=found.low, high=found.high)


def _part(finding: Finding, series: Series, confidence: float) -> _Part:
    placed = series.positions >= 0
    after = placed & (series.positions > max(finding.index or 0, (finding.since or 0) - 1))
    since = placed & (series.positions >= (finding.since or 0))
    about = placed.copy()
    coded = series.nuisance.get(finding.along or "")
    if coded is not None and finding.kind != "batch" and finding.level in coded.levels:
        about &= coded.codes == coded.levels.index(finding.level)
    if finding.cells:
        touched = [k for k, label in enumerate(series.cells.levels) if label in finding.cells]
        about &= np.isin(series.cells.codes, touched)
    if int((after & about).sum()) >= N_AFTER:
        since = after
    before = placed & (series.positions < (finding.since or 0))
    reference = before if int(before.sum()) >= N_LEAST and finding.kind in {"drift", "spread"} else placed
    return _Part(series, _residuals(series, reference), about, before, since, confidence)


def _residuals(series: Series, reference: Flags) -> Floats:
    """Return values less their cells' means over the reference runs; a cell without any uses all."""
    codes, n_cells = series.cells.codes, len(series.cells.levels)
    means = _means(series.values, codes, n_cells)
    among = _means(series.values[reference], codes[reference], n_cells)
    return series.values - np.where(np.isnan(among), means, among)[codes]


def _means(values: Floats, codes: np.ndarray, n_cells: int) -> Floats:
    counts = np.bincount(codes, minlength=n_cells)
    sums = np.bincount(codes, values, minlength=n_cells)
    return np.where(counts > 0, sums / np.maximum(counts, 1), np.nan)


def _shift(_finding: Finding, part: _Part) -> Estimate:
    """Return the mean since the change less that before it."""
    before = part.chosen(part.before)
    if len(before) < N_LEAST:  # a level that is new: against all runs before it
        before = part.residuals[part.before]
    return effect.shift(before, part.chosen(part.since), confidence=part.confidence)


def _neighbours(_finding: Finding, part: _Part) -> Estimate:
    return effect.lag_one(part.chosen(part.since), confidence=part.confidence)


def _between(finding: Finding, part: _Part) -> Estimate:
    coded = part.series.nuisance.get(finding.along or "")
    if coded is None:
        raise NotTestable("a nuisance", "none")
    return effect.intraclass(part.residuals, coded.codes, confidence=part.confidence)


def _scatter(_finding: Finding, part: _Part) -> Estimate:
    return effect.spread_ratio(part.chosen(part.before), part.chosen(part.since), confidence=part.confidence)


def _cycle(_finding: Finding, part: _Part) -> Estimate:
    use = part.about
    found = effect.amplitude(part.residuals[use], part.series.started[use], DAY_S, confidence=part.confidence)
    return replace(found, name="amplitude of the daily cycle")


def _inherited(_finding: Finding, part: _Part) -> Estimate:
    parents = part.series.parents
    if parents is None:
        raise NotTestable("parents", "none")
    child = np.flatnonzero(parents >= 0)
    return effect.inheritance(
        part.residuals[child], part.residuals[parents[child]], confidence=part.confidence
    )


_ESTIMATES: dict[str, Callable[[Finding, _Part], Estimate]] = {
    "drift": _shift,
    "serial": _neighbours,
    "batch": _between,
    "spread": _scatter,
    "clock": _cycle,
    "lineage": _inherited,
}
