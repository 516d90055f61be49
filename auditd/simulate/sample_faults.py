"""The six faults that the invented campaign has, as effects and as the list in `planted.json`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from auditd.simulate.effects import CachedResults, Drift, Fault, IgnoredSeed, LevelShift
from auditd.simulate.sample_timetable import (
    BUILD_DAYS,
    BUILDS,
    LONE_HOST,
    LONE_LEVEL,
    Edition,
    first_run,
)
from auditd.simulate.simulated import Layout

BUILD_SHIFT = 1.5
"""Size of the build's shift, in standard deviations of a run."""
DRIFT_HOST, DRIFT_DAY, DRIFT_SIZE = "ibis", 4.0, 3.0
"""Where and when the drift begins, and how far it goes by the last run, in standard deviations."""
CACHE_HOST, CACHE_DAY = "heron", 6.0
N_CACHED, CACHE_LAG = 12, 3
"""Results given twice, and how many runs of its cell and host lie from a result to its echo."""
FAILURE_DAYS, FAILURE_SHARE = (9.0, 9.5), 0.7
USUAL_FAILURES = 0.004
"""Share of runs that fail at any time, in both editions."""
IGNORED_SEED_CELL = "anchor=twin mesh=coarse"


@dataclass(frozen=True, kw_only=True)
class SampleFault:
    """A planted fault as `planted.json` states it.

    `kinds` are the kinds of warning that name it rightly, `along`, `level` and `response` what such a warning
    says where they are not None, `cells` those that it may name, `says` a text that its message has. `index`
    is the first run that it touches, in order of start from 0, and `run` that run's id; `seen_from` is the
    first index at which it can be seen.
    """

    name: str
    kinds: tuple[str, ...]
    along: str | None
    level: str | None
    response: str | None
    cells: tuple[str, ...]
    says: str
    run: str
    index: int
    seen_from: int
    what: str


def own_effects(response: str, layout: Layout) -> list[Fault]:
    """The faults of one response: the drifting host in one, the build's shift in another."""
    if response == "peak_tension":
        at = first_run(layout, DRIFT_DAY, DRIFT_HOST)
        return [Drift(at=at, size=DRIFT_SIZE, along="host", level=DRIFT_HOST)]
    if response == "offset":
        return [LevelShift(size=BUILD_SHIFT, along="build", level=BUILDS[1])]
    return []


def shared_effects(layout: Layout) -> list[Fault]:
    """Faults that repeat whole results, so that all responses share them."""
    return [
        IgnoredSeed(cell=IGNORED_SEED_CELL),
        CachedResults(pairs=cached_pairs(layout), along="host", level=CACHE_HOST),
    ]


def cached_pairs(layout: Layout) -> tuple[tuple[int, int], ...]:
    """Pairs of runs of the cache's host and of one cell, the second of each an echo of the first."""
    pairs: list[tuple[int, int]] = []
    at = first_run(layout, CACHE_DAY, CACHE_HOST)
    own = np.flatnonzero((layout.nuisance["host"] == CACHE_HOST) & (np.arange(layout.n) >= at))
    cells = [cell for cell in np.unique(layout.cells[own]).tolist() if cell != IGNORED_SEED_CELL]
    for cell in cells:
        runs = own[layout.cells[own] == cell].tolist()
        starts = [2 * CACHE_LAG * j for j in range(N_CACHED // len(cells))]
        pairs += [(runs[j], runs[j + CACHE_LAG]) for j in starts]
    return tuple(sorted(pairs, key=lambda pair: pair[1]))


def failing_runs(edition: Edition, layout: Layout, rng: np.random.Generator) -> NDArray[np.bool_]:
    """Which runs fail: a few anywhere, and in the faulty edition most of half a day."""
    failed = rng.random(layout.n) < USUAL_FAILURES
    if edition == "faulty":
        at, until = _failing_stretch(layout)
        failed[at:until] |= rng.random(until - at) < FAILURE_SHARE
    return failed


def planted_faults(layout: Layout, failed: NDArray[np.bool_]) -> tuple[SampleFault, ...]:
    """List the faults of the faulty edition, in the order in which they begin."""
    faults = (
        _lone_configuration(layout),
        _ignored_seed(layout, failed),
        _build_shift(layout),
        _host_drift(layout),
        _cache(layout, failed),
        _failure_spell(layout, failed),
    )
    return tuple(sorted(faults, key=lambda fault: fault.index))


def sample_run_id(index: int) -> str:
    """Return the id of the run with this index in order of start."""
    return f"k{index + 1:04d}"


def _failing_stretch(layout: Layout) -> tuple[int, int]:
    first_day, last_day = FAILURE_DAYS
    return first_run(layout, first_day), first_run(layout, last_day)


def _fault(
    index: int,
    name: str,
    kinds: tuple[str, ...],
    what: str,
    *,
    says: str,
    along: str | None = None,
    level: str | None = None,
    response: str | None = None,
    cells: tuple[str, ...] = (),
    seen_from: int | None = None,
) -> SampleFault:
    return SampleFault(
        name=name,
        kinds=kinds,
        along=along,
        level=level,
        response=response,
        cells=cells,
        says=says,
        run=sample_run_id(index),
        index=index,
        seen_from=index if seen_from is None else seen_from,
        what=what,
    )


def _lone_configuration(layout: Layout) -> SampleFault:
    index = int(np.argmax(layout.nuisance["host"] == LONE_HOST))
    what = f"mesh={LONE_LEVEL} ran only on {LONE_HOST}, and {LONE_HOST} ran nothing else"
    return _fault(
        index,
        "lone configuration",
        ("confound",),
        what,
        says=f"mesh {LONE_LEVEL}",
        along="host",
        level=LONE_HOST,
    )


def _ignored_seed(layout: Layout, failed: NDArray[np.bool_]) -> SampleFault:
    runs = np.flatnonzero((layout.cells == IGNORED_SEED_CELL) & ~failed)
    what = (
        f"{IGNORED_SEED_CELL} ignores its seed: its {runs.size} completed runs, each with a seed of its own, "
        "gave one result"
    )
    return _fault(
        int(runs[0]),
        "ignored seed",
        ("repeat", "seed"),
        what,
        says=IGNORED_SEED_CELL,
        cells=(IGNORED_SEED_CELL,),
        seen_from=int(runs[1]),
    )


def _build_shift(layout: Layout) -> SampleFault:
    index = int(np.argmax(layout.nuisance["build"] == BUILDS[1]))
    first, last = min(BUILD_DAYS.values()), max(BUILD_DAYS.values())
    what = (
        f"build {BUILDS[1]}, which the hosts got between day {first:g} and day {last:g}, raises offset by "
        f"{BUILD_SHIFT:g} standard deviations of a run"
    )
    return _fault(
        index,
        "build shift",
        ("batch", "drift"),
        what,
        says=BUILDS[1],
        along="build",
        level=BUILDS[1],
        response="offset",
    )


def _host_drift(layout: Layout) -> SampleFault:
    what = (
        f"peak_tension on {DRIFT_HOST} rises in a straight line, by {DRIFT_SIZE:g} standard deviations "
        "of a run until the end"
    )
    return _fault(
        first_run(layout, DRIFT_DAY, DRIFT_HOST),
        "drifting host",
        ("drift",),
        what,
        says=DRIFT_HOST,
        along="host",
        level=DRIFT_HOST,
        response="peak_tension",
    )


def _cache(layout: Layout, failed: NDArray[np.bool_]) -> SampleFault:
    echoes = [second for first, second in cached_pairs(layout) if not failed[first] and not failed[second]]
    what = f"a cache on {CACHE_HOST} gave {len(echoes)} results twice, to the last digit, under other seeds"
    cells = tuple(sorted(set(layout.cells[echoes].tolist())))
    return _fault(echoes[0], "cache", ("repeat",), what, says="cache", cells=cells)


def _failure_spell(layout: Layout, failed: NDArray[np.bool_]) -> SampleFault:
    at, until = _failing_stretch(layout)
    index = at + int(np.argmax(failed[at:until]))
    n_inside, n_all = int(failed[at:until].sum()), int(failed.sum())
    what = (
        f"{n_inside} of the {until - at} runs that started between day {FAILURE_DAYS[0]:g} and day "
        f"{FAILURE_DAYS[1]:g} failed; elsewhere {n_all - n_inside} did"
    )
    kinds = ("failure", "serial", "drift", "spread")
    return _fault(index, "failures", kinds, what, says="failed", response="completed")
