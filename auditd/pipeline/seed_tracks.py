"""Seed blocks (common random numbers): audited as block means in order, and as contrasts within blocks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import product

import numpy as np

from auditd.pipeline.tracks import Raised, Track
from auditd.plan import Plan
from auditd.records import cell_label, normal_level
from auditd.sequential import EarlierRuns, SeedBlockBuilder, SeedBlocks
from auditd.store.runs import StoredRun

NO_SEED = "(no seed)"


def seed_cells(plan: Plan) -> list[str]:
    """Return the cells that make a seed block complete, from the schedule; empty where it does not say."""
    levels = {} if plan.schedule is None else plan.schedule.levels
    if set(levels) != set(plan.factors) or not levels:
        return []
    cells = product(*([normal_level(level) for level in levels[name]] for name in plan.factors))
    found = sorted(cell_label(dict(zip(plan.factors, cell, strict=True))) for cell in cells)
    return found if len(found) > 1 else []


class SeedTracks:
    """Completes each response's seed blocks and hands them to its two tracks.

    Parameters
    ----------
    plan : with seeds in blocks and the schedule's levels.
    first_position : position of the first run that is handed over.
    """

    def __init__(self, plan: Plan, first_position: int) -> None:
        self._first = first_position
        self._cells = seed_cells(plan)
        self._builders: dict[str, SeedBlockBuilder] = {}
        self._positions: dict[str, list[int]] = {}
        self._held: dict[str, list[tuple[str, dict[str, str], float]]] = {}
        self._made: tuple[str, SeedBlocks] | None = None

    def advance(
        self, track: Track, runs: EarlierRuns, block: Sequence[StoredRun], epoch: int
    ) -> list[Raised]:
        """Audit the seed blocks that the next runs complete."""
        if track.part == "block means":
            self._made = (track.response, self._complete(track.response, runs, block))
        made = self._made[1] if self._made is not None else None
        if made is None:
            return []
        means = track.part == "block means"
        index = made.mean_index if means else made.contrast_index
        if len(index) == 0:
            return []
        held = self._held[track.response]
        own = EarlierRuns(
            values=made.mean if means else made.contrast,
            cells=["block"] * len(index) if means else made.contrast_cells,
            ids=[held[k][0] for k in index.tolist()],
            nuisance={}
            if means
            else {name: [held[k][1][name] for k in index.tolist()] for name in runs.nuisance},
            times=np.array([held[k][2] for k in index.tolist()]),
        )
        places = self._positions.setdefault(track.name, [])
        places += [self._first + int(k) for k in index]
        return [_placed(one, places) for one in track.advance(own, epoch, 0)]

    def placed(self, track: Track, raised: Raised) -> Raised:
        """Return an alarm of a track, with indices as positions."""
        return _placed(raised, self._positions[track.name])

    def _complete(self, response: str, runs: EarlierRuns, block: Sequence[StoredRun]) -> SeedBlocks:
        builder = self._builders.setdefault(response, SeedBlockBuilder(self._cells))
        held = self._held.setdefault(response, [])
        labels = {name: list(runs.nuisance[name]) for name in runs.nuisance}  # type: ignore[call-overload]
        times = np.asarray(runs.times)
        for k, stored in enumerate(block):
            held.append((stored.run.id, {name: labels[name][k] for name in labels}, float(times[k])))
        seeds = [stored.run.seed or NO_SEED for stored in block]
        return builder.take(runs.values, runs.cells, seeds)


def _placed(raised: Raised, places: Sequence[int]) -> Raised:
    """Return an alarm of the block series with indices as places of the runs that completed the blocks."""
    alarm = raised.alarm
    return replace(
        raised,
        index=places[alarm.index],
        since=places[alarm.since],
        since_low=places[alarm.since_low],
        since_high=places[alarm.since_high],
    )
