"""All columns judged: the facts of a run, its outcomes, settings and circumstances."""

from __future__ import annotations

import itertools
import math
from collections import Counter

import msgspec

from auditd.drafting import hints
from auditd.drafting.circumstances import Circumstances, circumstances_of
from auditd.drafting.column import Landed
from auditd.drafting.facts import (
    Judged,
    find_id,
    find_parent,
    find_seed,
    find_sequence,
    find_status,
)
from auditd.drafting.times import Span, span_of, times_of

N_EARLIER = 8
"""A run is well ranked when its cell has so many earlier runs (design of the sequential audit)."""
SHARE_APART = 0.995
"""Runs on one level never overlap: at least so many neighbours do not."""
PATIENCE_FACTOR = 1.5


class Judgement(msgspec.Struct, kw_only=True):
    """What each column is, and what follows for order, seeds, machines and baseline."""

    landed: Landed
    id: Judged | None
    sequence: Judged | None
    seed: Judged | None
    parent: Judged | None
    status: Judged | None
    completed: list[str]
    span: Span
    circumstances: Circumstances
    order: str
    patience_h: int | None
    exclusive: list[str]
    block_seeds: bool
    share_ranked: float


def judge(landed: Landed) -> Judgement:
    """Return what each column is."""
    span = span_of(times_of(landed))
    timed = [one for one in (span.started, span.finished, *span.others) if one is not None]
    taken = {one.column.key for one in timed}
    facts: dict[str, Judged | None] = {}
    for name, find in (("sequence", find_sequence), ("id", find_id), ("seed", find_seed)):
        facts[name] = found = find(landed, taken)
        taken |= {found.column.key} if found is not None else set()
    ids = facts["id"]
    parent = find_parent(landed, taken, None if ids is None else ids.column)
    taken |= {parent.column.key} if parent is not None else set()
    status = find_status(landed, taken)
    taken |= {status[0].column.key} if status is not None else set()
    order = _order(landed, facts["sequence"], span)
    found_circumstances = circumstances_of(landed, taken, order)
    found_circumstances.left += [(one.column.key, "a time besides start and end") for one in span.others]
    _leave_durations(found_circumstances, span)
    cells = _cells(landed, found_circumstances)
    return Judgement(
        landed=landed,
        id=ids,
        sequence=facts["sequence"],
        seed=facts["seed"],
        parent=parent,
        status=None if status is None else status[0],
        completed=[] if status is None else status[1],
        span=span,
        circumstances=found_circumstances,
        order="sequence" if facts["sequence"] else "started" if span.started else "arrival",
        patience_h=_patience_h(landed, span),
        exclusive=_exclusive(landed, found_circumstances, span),
        block_seeds=_is_block(facts["seed"], cells),
        share_ranked=_share_ranked(cells, order),
    )


def _order(landed: Landed, sequence: Judged | None, span: Span) -> list[int]:
    """Return the records in the order of the runs, as far as it is stated."""
    if sequence is not None:
        keys = [float(text or 0) for text in sequence.column.texts]
    elif span.started is not None:
        keys = [math.inf if at is None else at for at in span.started.seconds]
    else:
        return list(range(landed.n))
    return sorted(range(landed.n), key=keys.__getitem__)


def _leave_durations(found: Circumstances, span: Span) -> None:
    """Leave out a stated duration where start and end give it: it is added by itself."""
    if span.started is None or span.finished is None:
        return
    kept = []
    for one in found.responses:
        if one.column.words & hints.DURATION:
            found.left.append((one.column.key, "the tool adds `duration` itself, from start and end"))
        else:
            kept.append(one)
    found.responses = kept


def _cells(landed: Landed, found: Circumstances) -> list[tuple[str | None, ...]]:
    columns = [one.column.texts for one in found.factors]
    return [tuple(texts[k] for texts in columns) for k in range(landed.n)]


def _share_ranked(cells: list[tuple[str | None, ...]], order: list[int]) -> float:
    """Return the share of runs that have `N_EARLIER` earlier ones in their cell."""
    seen: Counter[tuple[str | None, ...]] = Counter()
    ranked = 0
    for record in order:
        ranked += seen[cells[record]] >= N_EARLIER
        seen[cells[record]] += 1
    return ranked / max(len(order), 1)


def _is_block(seed: Judged | None, cells: list[tuple[str | None, ...]]) -> bool:
    """Whether each seed serves one run in each of several cells: common random numbers, intended."""
    n_cells = len(set(cells))
    if seed is None or n_cells < 2:
        return False
    met: dict[str, list[tuple[str | None, ...]]] = {}
    for text, cell in zip(seed.column.texts, cells, strict=True):
        if text is not None:
            met.setdefault(text, []).append(cell)
    shared = sum(len(of) == len(set(of)) == n_cells for of in met.values())
    return shared > 0.8 * len(met) > 0


def _patience_h(landed: Landed, span: Span) -> int | None:
    """Return for how long a run may be waited for, where files land whole after many runs."""
    if span.started is None:
        return None
    reach: dict[int, list[float]] = {}
    for file, at in zip(landed.files, span.started.seconds, strict=True):
        if file in landed.whole_files and at is not None:
            low, high = reach.get(file, [at, at])
            reach[file] = [min(low, at), max(high, at)]
    longest_s = max((high - low for low, high in reach.values()), default=0.0)
    return None if longest_s < 600 else max(math.ceil(PATIENCE_FACTOR * longest_s / 3600), 1)


def _exclusive(landed: Landed, found: Circumstances, span: Span) -> list[str]:
    """Return the nuisances on whose levels runs never overlap."""
    if span.started is None or span.finished is None:
        return []
    return [
        one.column.key
        for one in found.nuisance
        if one.column.words & hints.MACHINE
        and _apart(landed, one, span.started.seconds, span.finished.seconds)
    ]


def _apart(landed: Landed, one: Judged, starts: list[float | None], ends: list[float | None]) -> bool:
    by_level: dict[str, list[tuple[float, float]]] = {}
    for text, start, end in zip(one.column.texts, starts, ends, strict=True):
        if text is not None and start is not None and end is not None:
            by_level.setdefault(text, []).append((start, end))
    n = apart = 0
    for runs in by_level.values():
        runs.sort()
        n += len(runs) - 1
        apart += sum(later[0] >= earlier[1] for earlier, later in itertools.pairwise(runs))
    return n >= landed.n / 2 and apart >= SHARE_APART * n
