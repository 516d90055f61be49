"""Which cell of the invented campaign ran where and when: moored kelp rafts in random seas, on five hosts.

Two editions: a faulty one, and a clean twin of the same shape in which nothing is wrong.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from auditd.simulate.simulated import Floats, Labels, Layout

Edition = Literal["faulty", "clean"]

ORIGIN = 1_772_438_400.0
"""2026-03-02T08:00:00Z, the campaign's begin, in POSIX seconds."""
DAY_S = 86400.0
HOSTS = ("gull", "heron", "ibis", "plover", "teal")
ANCHORS = ("single", "twin")
MINUTES = {"coarse": 46.0, "middle": 54.0, "fine": 66.0}
"""Usual length of a run, by mesh."""
LENGTH_SPREAD = 0.06
"""Standard deviation of the logarithm of a run's length."""
PAUSE_S = (5.0, 40.0)
"""Shortest and longest pause between two runs of a host."""
LONE_LEVEL, LONE_HOST = "fine", "teal"
"""In the faulty edition this mesh ran only on this host, and this host ran nothing else."""
N_BLOCKS, N_LONE_BLOCKS = {"clean": 48, "faulty": 75}, 113
"""Blocks a host: of six cells, of four cells; and of the two cells of the lone level."""
BUILDS = ("b41", "b42")
BUILD_DAYS = {"gull": 3.0, "heron": 3.4, "ibis": 3.8, "plover": 4.2, "teal": 4.6}
"""When each host got the second build, in days after the begin."""


@dataclass(frozen=True, kw_only=True)
class Timetable:
    """When each run started and finished (POSIX seconds), in order of start."""

    layout: Layout
    finished: Floats
    anchors: Labels
    meshes: Labels


def sample_timetable(edition: Edition, rng: np.random.Generator) -> Timetable:
    """Let each host work through its blocks, then sort all runs by their start."""
    rows: list[tuple[float, float, str, str, str]] = []
    for number, host in enumerate(HOSTS):
        now = ORIGIN + 600.0 * number
        for anchor, mesh in _cells_in_turn(edition, host, rng):
            length_s = 60 * MINUTES[mesh] * float(np.exp(LENGTH_SPREAD * rng.standard_normal()))
            rows.append((round(now, 3), round(now + length_s, 3), host, anchor, mesh))
            now += length_s + float(rng.uniform(*PAUSE_S))
    starts, ends, hosts, anchors, meshes = zip(*sorted(rows), strict=True)
    builds = [BUILDS[began >= build_time(host)] for began, host in zip(starts, hosts, strict=True)]
    cells = [f"anchor={anchor} mesh={mesh}" for anchor, mesh in zip(anchors, meshes, strict=True)]
    layout = Layout(
        cells=np.asarray(cells),
        nuisance={"host": np.asarray(hosts), "build": np.asarray(builds)},
        times=np.asarray(starts),
    )
    return Timetable(
        layout=layout, finished=np.asarray(ends), anchors=np.asarray(anchors), meshes=np.asarray(meshes)
    )


def build_time(host: str) -> float:
    """When a host got the second build, in POSIX seconds."""
    return ORIGIN + DAY_S * BUILD_DAYS[host]


def first_run(layout: Layout, day: float, host: str | None = None) -> int:
    """Index of the first run, of a host if named, that started so many days after the begin."""
    later = layout.times >= ORIGIN + DAY_S * day
    if host is not None:
        later &= layout.nuisance["host"] == host
    return int(np.argmax(later))


def _cells_in_turn(edition: Edition, host: str, rng: np.random.Generator) -> list[tuple[str, str]]:
    """Blocks of every cell that the host runs, each in random order."""
    meshes, n_blocks = tuple(MINUTES), N_BLOCKS[edition]
    if edition == "faulty":
        lone = host == LONE_HOST
        meshes = tuple(mesh for mesh in MINUTES if (mesh == LONE_LEVEL) == lone)
        n_blocks = N_LONE_BLOCKS if lone else n_blocks
    block = [(anchor, mesh) for anchor in ANCHORS for mesh in meshes]
    return [block[i] for _ in range(n_blocks) for i in rng.permutation(len(block))]
