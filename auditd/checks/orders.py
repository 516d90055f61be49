"""The orders in which the full audit looks at a series, and those that it cannot look at, with the reason."""

from __future__ import annotations

import numpy as np

from auditd.checks.view import View, normal_scores, whole
from auditd.series.table import Floats, Ints, Series

N_LEVEL_MIN = 8
"""Runs a level must have for its own order to be asked."""
MAX_DURATION_CORRELATION_Z = 2.5758
"""Beyond this z (two-sided 1 %) the response depends on the duration, and finishing order on the outcome."""


def views(series: Series) -> tuple[list[View], list[str]]:
    """Return the views to ask, each order once, and sentences on what is not asked."""
    first = whole(series)
    found, not_asked = [first], []
    for name, keys, why_not in (
        ("start", series.started, None),
        ("finish", series.finished, _outcome_orders(series)),
        ("seed", _seed_keys(series), None),
    ):
        if np.isnan(keys).any() or len(keys) == 0:
            not_asked.append(f"by {name}: not stated for every run")
            continue
        if why_not is not None:
            not_asked.append(f"by {name}: {why_not}")
            continue
        rows = np.argsort(keys, kind="stable")
        if not any(np.array_equal(rows, view.rows) for view in found):
            found.append(first.in_order(rows, name))
    return found, not_asked


def views_within(view: View) -> tuple[list[View], list[str]]:
    """Return the order within each nuisance's levels, and sentences on nuisances that cannot be asked."""
    found, not_asked = [], []
    for name, coded in view.series.nuisance.items():
        counts = np.bincount(coded.codes, minlength=len(coded.levels))
        large = counts >= N_LEVEL_MIN
        if not large.any():
            not_asked.append(f"within {name}: no level has {N_LEVEL_MIN} runs")
            continue
        if large.sum() == 1 and counts[large][0] == view.n:
            continue
        rows = np.flatnonzero(large[coded.codes])
        rows = rows[np.argsort(coded.codes[rows], kind="stable")]
        inside = view.in_order(rows, name, groups=coded.codes)
        found.append(_centred(inside, coded.codes[rows]))
    return found, not_asked


def _centred(view: View, groups: Ints) -> View:
    """Take off the levels' own means, so that a batch effect is not asked twice."""
    from dataclasses import replace

    counts = np.maximum(np.bincount(groups), 1)
    scores = view.scores - (np.bincount(groups, view.scores) / counts)[groups]
    values = view.values - (np.bincount(groups, view.values) / counts)[groups]
    return replace(view, scores=scores, values=values)


def _outcome_orders(series: Series) -> str | None:
    """Say whether finishing order depends on the outcome: then independent runs look dependent in it."""
    duration = series.finished - series.started
    if np.isnan(duration).any() or len(duration) < N_LEVEL_MIN:
        return None
    a = normal_scores(series.values, series.cells.codes)
    b = normal_scores(duration, series.cells.codes)
    if a.std() == 0 or b.std() == 0:
        return None
    z = float(np.corrcoef(a, b)[0, 1]) * np.sqrt(len(a) - 1)
    if abs(z) < MAX_DURATION_CORRELATION_Z:
        return None
    return "the response depends on the duration, so finishing order depends on the outcome"


def _seed_keys(series: Series) -> Floats:
    """Return seeds as numbers; NaN throughout where one is not a number."""
    none = np.full(len(series.values), np.nan)
    if series.seeds is None or (series.seeds.codes < 0).any():
        return none
    try:
        numbers = np.array([float(int(text)) for text in series.seeds.levels])
    except ValueError:
        return none
    return numbers[series.seeds.codes]
