"""The orders in which the full audit looks at a series, and those that it cannot look at, with the reason."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from auditd.checks.view import View, normal_scores, whole
from auditd.series.table import Floats, Ints, Series

N_LEVEL_MIN = 8
"""Runs a level must have for its own order to be asked."""
N_LEVELS_MAX = 200
"""Levels whose own orders are asked, the largest ones: with more, each has too little to say."""
STATED_MIN = 0.5
"""Share of the runs that must state a time or seed for the order by it to be asked."""
MAX_DURATION_CORRELATION_Z = 2.5758
"""Beyond this z (two-sided 1 %) the response depends on the duration, and finishing order on the outcome."""


def views(series: Series) -> tuple[list[View], list[str]]:
    """Return the views to ask, each order once, and sentences on what is not asked."""
    first = whole(series)
    found, not_asked = [first], []
    seeds, no_seeds = _seed_keys(series)
    for name, keys, known in (
        ("start", series.started, None),
        ("finish", series.finished, _outcome_orders(first)),
        ("seed", seeds, no_seeds),
    ):
        stated = np.flatnonzero(~np.isnan(keys))
        why_not = known or _too_few(len(stated), len(keys))
        if why_not is not None:
            not_asked.append(f"by {name}: {why_not}")
            continue
        rows = stated[np.argsort(keys[stated], kind="stable")]
        if name == "seed":
            rows = _once(rows, keys)
        same = next((view.along for view in found if np.array_equal(rows, view.rows)), None)
        if same is not None:
            not_asked.append(f"by {name}: the same order as by `{same}`, asked once")
            continue
        found.append(replace(first.in_order(rows, name), why_not=None))
    return found, not_asked


def views_within(view: View) -> tuple[list[View], list[str]]:
    """Return the order within each nuisance's levels, and sentences on nuisances that cannot be asked."""
    found, not_asked = [], []
    for name, coded in view.series.nuisance.items():
        counts = np.bincount(coded.codes, minlength=max(len(coded.levels), 1))
        large = counts >= N_LEVEL_MIN
        if counts.max(initial=0) == 1:
            not_asked.append(f"within {name}: one run a level, so nothing can be said of its levels")
            continue
        if not large.any():
            not_asked.append(f"within {name}: no level has {N_LEVEL_MIN} runs")
            continue
        if large.sum() == 1 and counts[large][0] == view.n:
            not_asked.append(f"within {name}: one level, which is the whole order")
            continue
        if large.sum() > N_LEVELS_MAX:
            large &= counts >= np.sort(counts)[-N_LEVELS_MAX]
            large[np.flatnonzero(large)[N_LEVELS_MAX:]] = False
        n_left = int((counts > 0).sum() - large.sum())
        if n_left:
            not_asked.append(
                f"within {name}: {n_left} levels with fewer runs than the {int(large.sum())} asked"
            )
        rows = np.flatnonzero(large[coded.codes])
        rows = rows[np.argsort(coded.codes[rows], kind="stable")]
        found.append(_centred(view.in_order(rows, name, groups=coded.codes, levels=coded.levels)))
    return found, not_asked


def between(view: View) -> list[View]:
    """Return the whole order once for each nuisance, with its levels as groups."""
    return [
        replace(view, along=name, groups=coded.codes, levels=coded.levels)
        for name, coded in view.series.nuisance.items()
    ]


def _too_few(n_stated: int, n: int) -> str | None:
    if n_stated > STATED_MIN * n:
        return None
    return "not stated" if n_stated == 0 else f"stated for {n_stated} of {n} runs only"


def _centred(view: View) -> View:
    """Take off the levels' own means, so that a batch effect is not asked twice."""
    groups = view.groups if view.groups is not None else view.cells
    counts = np.maximum(np.bincount(groups), 1)
    scores = view.scores - (np.bincount(groups, view.scores) / counts)[groups]
    values = view.values - (np.bincount(groups, view.values) / counts)[groups]
    scores[np.abs(scores) < 1e-12] = 0.0
    return replace(view, scores=scores, values=values)


def _outcome_orders(view: View) -> str | None:
    """Say whether finishing order depends on the outcome: then independent runs look dependent in it."""
    series = view.series
    duration = series.finished - series.started
    if np.isnan(duration).any() or len(duration) < N_LEVEL_MIN:
        return None
    b = normal_scores(duration, series.cells.codes)
    if not view.scores.std() > 0 or not b.std() > 0:
        return None
    z = float(np.corrcoef(view.scores, b)[0, 1]) * np.sqrt(len(b) - 1)
    if abs(z) < MAX_DURATION_CORRELATION_Z:
        return None
    return "the response depends on the duration, so finishing order depends on the outcome"


def _seed_keys(series: Series) -> tuple[Floats, str | None]:
    """Return seeds as numbers, NaN where none is stated, and why they cannot be sorted."""
    keys = np.full(len(series.values), np.nan)
    if series.seeds is None or len(series.seeds.levels) == 0:
        return keys, None
    try:
        numbers = np.array([float(int(text)) for text in series.seeds.levels])
    except (ValueError, OverflowError):
        return keys, "seeds are not all whole numbers"
    stated = series.seeds.codes >= 0
    keys[stated] = numbers[series.seeds.codes[stated]]
    return keys, None


def _once(rows: Ints, keys: Floats) -> Ints:
    """Keep the first run of each seed: runs of one seed are alike by design, or a fault told elsewhere."""
    kept: Ints = rows[np.diff(keys[rows], prepend=np.nan) != 0]
    return kept
