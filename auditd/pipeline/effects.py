"""The effect that a sequential finding shows, on the audited scale, from the runs since it began.

At an alarm an effect is inflated, since the alarm chose its moment; as soon as 30 runs have come after it,
they alone are used.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from auditd.errors import BadInput, NotTestable
from auditd.plan import Plan
from auditd.records import Effect, Finding
from auditd.series.table import Flags, Floats, RunTable, Series

N_AFTER = 30
"""Runs after the alarm from which they alone are used."""
N_LEAST = 8
"""Runs below which no effect is given."""
DAY_S = 86_400.0


class _Part(NamedTuple):
    """The residuals that a finding is about: those before it began, and those since."""

    series: Series
    residuals: Floats
    about: Flags
    before: Flags
    since: Flags
    z: float

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
        return _ESTIMATES[finding.kind](finding, part)
    except (NotTestable, BadInput):
        return None


def _part(finding: Finding, series: Series, confidence: float) -> _Part:
    from scipy.special import ndtri

    placed = series.positions >= 0
    after = placed & (series.positions > (finding.index or 0))
    since = placed & (series.positions >= (finding.since or 0))
    about = placed.copy()
    coded = series.nuisance.get(finding.along or "")
    if coded is not None and finding.kind != "batch" and finding.level in coded.levels:
        about &= coded.codes == coded.levels.index(finding.level)
    if int((after & about).sum()) >= N_AFTER:
        since = after
    before = placed & (series.positions < (finding.since or 0))
    z = float(ndtri(0.5 + confidence / 2))
    reference = before if int(before.sum()) >= N_LEAST and finding.kind in {"drift", "spread"} else placed
    return _Part(series, _residuals(series, reference), about, before, since, z)


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


def _shift(_finding: Finding, part: _Part) -> Effect | None:
    """Return the mean since the change less that before it; errors widened for lag-1 correlation."""
    after, before = part.chosen(part.since), part.chosen(part.before)
    if len(before) < N_LEAST:  # a level that is new: against all runs before it
        before = part.residuals[part.before]
    if min(len(after), len(before)) < N_LEAST:
        return None
    value = float(after.mean() - before.mean())
    error = math.hypot(_error(after), _error(before))
    return Effect(name="shift", value=value, low=value - part.z * error, high=value + part.z * error)


def _error(values: Floats) -> float:
    """Return the standard error of a mean under AR(1) errors with the values' own lag-1 correlation."""
    r = min(max(_lag_one(values), 0.0), 0.9)
    return float(values.std(ddof=1)) * math.sqrt((1 + r) / (1 - r) / len(values))


def _lag_one(values: Floats) -> float:
    centred = values - values.mean()
    whole = float(centred @ centred)
    return float(centred[1:] @ centred[:-1]) / whole if whole > 0 else 0.0


def _neighbours(_finding: Finding, part: _Part) -> Effect | None:
    values = part.chosen(part.since)
    return (
        None
        if len(values) < N_LEAST
        else _correlation("lag-1 correlation", _lag_one(values), len(values), part.z)
    )


def _correlation(name: str, r: float, n: int, z: float) -> Effect:
    """Return a correlation of neighbours in chains, with an interval on Fisher's scale.

    Pairs that share runs vary more than independent ones: Bartlett (1946), J. Roy. Statist. Soc. Suppl. 8,
    gives (1 - r²)/n for the first autocorrelation of an AR(1), where Fisher's interval takes (1 - r²)²/n.
    """
    kept = min(max(r, -0.999), 0.999)
    centre, half = math.atanh(kept), z / math.sqrt(max(n - 3, 1) * (1 - kept**2))
    return Effect(name=name, value=r, low=math.tanh(centre - half), high=math.tanh(centre + half))


def _between(finding: Finding, part: _Part) -> Effect | None:
    from auditd.stats import one_way

    coded = part.series.nuisance.get(finding.along or "")
    if coded is None:
        return None
    found = one_way(part.residuals, coded.codes)
    return Effect(
        name="intraclass correlation",
        value=float(found.icc),
        low=float(found.icc_low),
        high=float(found.icc_high),
    )


def _scatter(_finding: Finding, part: _Part) -> Effect | None:
    """Return the ratio of standard deviations, since to before, with the interval of the F ratio."""
    after, before = part.chosen(part.since), part.chosen(part.before)
    if min(len(after), len(before)) < N_LEAST or not before.std() > 0 or not after.std() > 0:
        return None
    ratio = float(after.std(ddof=1) / before.std(ddof=1))
    half = part.z * math.sqrt(_log_variance(after) + _log_variance(before))
    return Effect(
        name="ratio of standard deviations",
        value=ratio,
        low=ratio * math.exp(-half),
        high=ratio * math.exp(half),
    )


def _log_variance(values: Floats) -> float:
    """Return the variance of the log standard deviation, by the values' own fourth moment."""
    centred = values - values.mean()
    kurtosis = float((centred**4).mean() / (centred**2).mean() ** 2)
    return max(kurtosis - 1, 0.1) / (4 * len(values))


def _cycle(_finding: Finding, part: _Part) -> Effect | None:
    """Return the amplitude of the daily cycle by least squares on sine and cosine."""
    use = part.about & ~np.isnan(part.series.started)
    y, angle = part.residuals[use], 2 * np.pi * part.series.started[use] / DAY_S
    if len(y) < N_LEAST:
        return None
    design = np.column_stack([np.ones_like(angle), np.sin(angle), np.cos(angle)])
    fitted, *_ = np.linalg.lstsq(design, y, rcond=None)
    rest = y - design @ fitted
    amplitude = float(math.hypot(fitted[1], fitted[2]))
    error = float(rest.std(ddof=3)) * math.sqrt(2 / len(y))
    return Effect(
        name="amplitude of the daily cycle",
        value=amplitude,
        low=max(amplitude - part.z * error, 0.0),
        high=amplitude + part.z * error,
    )


def _inherited(_finding: Finding, part: _Part) -> Effect | None:
    parents = part.series.parents
    if parents is None:
        return None
    child = np.flatnonzero(parents >= 0)
    if len(child) < N_LEAST:
        return None
    a, b = part.residuals[child], part.residuals[parents[child]]
    if not a.std() > 0 or not b.std() > 0:
        return None
    r = float(np.corrcoef(a, b)[0, 1])
    return _correlation("correlation with the parent", r, len(child), part.z)


_ESTIMATES: dict[str, Callable[[Finding, _Part], Effect | None]] = {
    "drift": _shift,
    "serial": _neighbours,
    "batch": _between,
    "spread": _scatter,
    "clock": _cycle,
    "lineage": _inherited,
}
