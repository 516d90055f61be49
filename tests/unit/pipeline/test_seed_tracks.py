"""Seed blocks: complete when every scheduled cell has run, audited at the run that completed them."""

import numpy as np
import pytest
from placed_runs import epoch, placed

from auditd.pipeline.entries import Entries
from auditd.pipeline.seed_tracks import SeedTracks, seed_cells
from auditd.pipeline.tracks import Track
from auditd.plan_reading import parse_plan
from auditd.sequential import Options

TEXT = """
[record]
seed = "s"
[responses.y]
at = "y"
[factors]
c = "c"
[nuisance]
host = "h"
[seeds]
role = "block"
"""
PLAN = parse_plan(TEXT + '[schedule]\nlevels = {c = ["a", "b"]}\n')
N_BLOCKS = 150


def runs(step_at, *, within=False):
    rng = np.random.default_rng(2)
    found = []
    for k in range(2 * N_BLOCKS):
        block, cell = divmod(k, 2)
        if cell == 0:
            luck = rng.normal()
        moved = 2.0 * (block >= step_at) * (cell if within else 1)
        found.append(
            placed(50 + k, luck + 0.1 * rng.normal() + moved, cell={"c": "ab"[cell]}, seed=str(block))
        )
    return found


def options(part):
    along = () if part == "block means" else ("host",)
    return Options(nuisances=along, alarm_budget=0.05, has_times=True, key=b"k", response=f"y {part}")


def audited(made, size=37):
    tracks = {part: Track("y", part, options(part)) for part in ("block means", "within blocks")}
    blocks = SeedTracks(PLAN, 50)
    entries = Entries(PLAN, [epoch()], (), 50)
    alarms = []
    for first in range(0, len(made), size):
        block = made[first : first + size]
        taken = entries.take(block).of("y", PLAN)
        for track in tracks.values():
            alarms += blocks.advance(track, taken, block, 1)
    return tracks, alarms, blocks


@pytest.mark.parametrize(
    ("schedule", "cells"),
    [
        ('[schedule]\nlevels = {c = ["b", "a"]}\n', ["c=a", "c=b"]),
        ('[schedule]\nlevels = {c = ["a"]}\n', []),
        ("[schedule]\nreplicates = 3\n", []),
        ("", []),
    ],
)
def test_blocks_need_levels_that_the_schedule_names(schedule, cells):
    """Without every factor's levels, or with one cell, no block can be called complete."""
    assert seed_cells(parse_plan(TEXT + schedule)) == cells


def test_common_luck_is_no_dependence():
    """Runs of one seed share its luck by design: neither series alarms, and every block is counted once."""
    tracks, alarms, _ = audited(runs(step_at=10**6))
    assert alarms == []
    assert tracks["block means"].auditor.n_runs == N_BLOCKS
    assert tracks["within blocks"].auditor.n_runs == N_BLOCKS


@pytest.mark.parametrize(("within", "part"), [(False, "block means"), (True, "within blocks")])
def test_a_step_alarms_in_the_series_that_shows_it_at_a_run_of_the_campaign(within, part):
    """A shift of whole blocks shows in their means, one of a cell within them; places are of the campaign."""
    tracks, alarms, blocks = audited(runs(step_at=60, within=within))
    mine = [one for one in alarms if one.part == part]
    assert mine
    first = mine[0]
    assert 50 + 120 <= first.index < 50 + 300
    assert first.index % 2 == 1
    assert abs(first.since - (50 + 121)) <= 40
    again = blocks.placed(tracks[part], tracks[part].raised(first.alarm, 1, 0))
    assert (again.index, again.since) == (first.index, first.since)


def test_the_size_of_blocks_of_reading_does_not_matter():
    """Runs that come one by one give the alarms of runs that come at once."""
    made = runs(step_at=60)
    at_once, one_by_one = (audited(made, size)[1] for size in (10**6, 1))
    key = lambda one: (one.part, one.index, one.since, one.alarm.key)  # noqa: E731 - a sort key
    assert sorted(map(key, at_once)) == sorted(map(key, one_by_one))
