"""Exchangeable campaigns as the daemon audits them: runs land, wait for their place and enter by a plan."""

import atexit
import functools
import pathlib
import shutil
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import msgspec
import numpy as np

from auditd.pipeline.auditing import Audit
from auditd.pipeline.campaign import Campaign, open_for_taking, settle_plan
from auditd.records import Run
from auditd.series.placing import Placer
from auditd.store.clock import to_us
from auditd.store.runs import StoredRun

N_RUNS, N_CELLS = 1000, 4
BEGAN = datetime(2031, 3, 3, tzinfo=UTC)
SPACING_S = 400.0
N_WORKERS = 32

PLAN = """
[campaign]
title = "calibration"
alarm_budget = 0.05
[landing]
paths = ["results"]
match = ["*.json"]
[record]
id = "/id"
started = "/start"
finished = "/end"
status = "/status"
completed = ["ok"]
seed = "/seed"
[responses.y]
at = "/y"
[factors]
cell = "/cell"
[nuisance]
host = "/host"
build = "/build"
hour = {{from = "started", by = "hour"}}
[order]
by = "started"
{more}
"""
BY_OUTCOME = '[design]\nallocation = "outcome"\n'
BY_STAGE = BY_OUTCOME + 'stage = "/stage"\n'
SEED_BLOCKS = (
    '[seeds]\nrole = "block"\n[schedule]\nreplicates = 250\nlevels = {cell = ["0", "1", "2", "3"]}\n'
)


@dataclass(frozen=True, kw_only=True)
class Landed:
    """A campaign's runs as columns, in the order of their starts."""

    y: np.ndarray
    cell: np.ndarray
    start_s: np.ndarray
    duration_s: np.ndarray
    host: np.ndarray
    stage: np.ndarray | None = None
    seed: np.ndarray | None = None


@dataclass(frozen=True, kw_only=True)
class DaemonScenario:
    """A row of the table: independent runs, the plan that declares how they were made, and the level."""

    name: str
    make: Callable  # rng -> Landed
    more: str = ""


def evenly(rng, y, cell, **columns):
    """Runs started at even distances on one of five hosts, each busy for a heavy-tailed while."""
    n = y.size
    given = {"host": rng.integers(5, size=n), "duration_s": 200.0 * rng.lognormal(sigma=0.8, size=n)}
    return Landed(y=y, cell=cell, start_s=np.arange(n) * SPACING_S, **(given | columns))


def complete_blocks(rng):
    """Every cell once in each block, in an order of the block's own."""
    return np.concatenate([rng.permutation(N_CELLS) for _ in range(N_RUNS // N_CELLS)])


def of_law(draw):
    def make(rng):
        cell = complete_blocks(rng)
        return evenly(rng, draw(rng, N_RUNS) + 3.0 * cell, cell)

    return make


def joining_and_leaving(rng):
    """Twelve hosts, each present for a stretch of its own; a run goes to any that is present."""
    first = rng.integers(-200, N_RUNS - 100, size=12)
    first[:3] = 0
    last = first + rng.integers(100, 700, size=12)
    last[:3] = [N_RUNS, 400, 700]
    present = (first[:, None] <= np.arange(N_RUNS)) & (np.arange(N_RUNS) < last[:, None])
    host = np.argmax(rng.random((12, N_RUNS)) * present, axis=0)
    cell = complete_blocks(rng)
    return evenly(rng, rng.normal(size=N_RUNS) + 3.0 * cell, cell, host=host)


def parallel_workers(rng):
    """Each worker starts its next run when its last ends; durations are Pareto with exponent 1.5."""
    free = np.sort(rng.random(N_WORKERS)) * 60.0
    start, host = np.empty(N_RUNS), np.empty(N_RUNS, dtype=int)
    duration = 300.0 * (1.0 + rng.pareto(1.5, size=N_RUNS))
    for number in range(N_RUNS):
        host[number] = np.argmin(free)
        start[number] = free[host[number]]
        free[host[number]] += duration[number] + 1.0
    cell = complete_blocks(rng)
    return Landed(y=rng.normal(size=N_RUNS), cell=cell, start_s=start, duration_s=duration, host=host)


def one_after_the_other(n_levels):
    """All runs of one cell before the next: A then B, or a sweep."""

    def make(rng):
        cell = np.arange(N_RUNS) * n_levels // N_RUNS
        return evenly(rng, rng.normal(size=N_RUNS) * (1.0 + 0.1 * cell) + cell, cell)

    return make


def common_seeds(rng):
    """Blocks of four runs with one seed: half of the variance is the seed's."""
    blocks = N_RUNS // N_CELLS
    seed = np.repeat(np.arange(blocks), N_CELLS)
    y = np.sqrt(0.5) * (rng.normal(size=blocks)[seed] + rng.normal(size=N_RUNS))
    cell = complete_blocks(rng)
    return evenly(rng, y + 3.0 * cell, cell, seed=seed)


def halving(rng, n_cells=64, n_rounds=6, n_repeats=8):
    """Each round repeats the cells left, then keeps the half with the better mean over all their runs."""
    left, y, cell, stage = np.arange(n_cells), [], [], []
    sums, counts = np.zeros(n_cells), np.zeros(n_cells)
    for number in range(n_rounds):
        order = rng.permutation(np.repeat(left, n_repeats))
        got = rng.normal(size=order.size)
        np.add.at(sums, order, got)
        np.add.at(counts, order, 1)
        y, cell, stage = [*y, got], [*cell, order], [*stage, np.full(order.size, number)]
        left = left[np.argsort(-(sums[left] / counts[left]))][: -(-left.size // 2)]
    return evenly(rng, np.concatenate(y), np.concatenate(cell), stage=np.concatenate(stage))


def optimiser(rng, n_cells=12):
    """Mostly the cell with the best mean so far, in batches of ten that are decided together."""
    sums, counts, y, cell = np.zeros(n_cells), np.zeros(n_cells), [], []
    for _ in range(N_RUNS // 10):
        best = int(np.argmax(np.where(counts > 0, sums / np.maximum(counts, 1), np.inf)))
        batch = np.where(rng.random(10) < 0.7, best, rng.integers(n_cells, size=10))
        got = rng.normal(size=10)
        np.add.at(sums, batch, got)
        np.add.at(counts, batch, 1)
        y, cell = [*y, got], [*cell, batch]
    stage = np.repeat(np.arange(N_RUNS // 10), 10)
    return evenly(rng, np.concatenate(y), np.concatenate(cell), stage=stage)


DAEMON_NULLS = (
    DaemonScenario(name="normal", make=of_law(lambda rng, n: rng.normal(size=n))),
    DaemonScenario(name="t, 2.2 degrees of freedom", make=of_law(lambda rng, n: rng.standard_t(2.2, size=n))),
    DaemonScenario(name="coarsely rounded", make=of_law(lambda rng, n: np.round(rng.normal(size=n) * 2) / 2)),
    DaemonScenario(name="hosts that join and leave", make=joining_and_leaving),
    DaemonScenario(name="32 parallel workers", make=parallel_workers),
    DaemonScenario(name="A then B", make=one_after_the_other(2)),
    DaemonScenario(name="sweep of 20 levels", make=one_after_the_other(20)),
    DaemonScenario(name="seed blocks, correlation .5", make=common_seeds, more=SEED_BLOCKS),
    DaemonScenario(name="successive halving, stages", make=halving, more=BY_STAGE),
    DaemonScenario(name="optimiser, stages of ten", make=optimiser, more=BY_STAGE),
)
WITHHELD = DaemonScenario(name="optimiser, no stages", make=optimiser, more=BY_OUTCOME)


@functools.cache
def opened(more):
    """A plan in use, in a store of its own that holds no runs."""
    folder = pathlib.Path(tempfile.mkdtemp(prefix="calibration-"))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    (folder / "results").mkdir()
    (folder / "plan.toml").write_text(PLAN.format(more=more), encoding="utf-8")
    campaign: Campaign = open_for_taking(folder / "plan.toml")
    settle_plan(campaign)
    return campaign


def entered_runs(campaign, landed, ok, name):
    """Let the runs land in the order in which they finish; give those that enter, and how many come late."""
    end_s = landed.start_s + landed.duration_s
    placer = Placer(campaign.plan)
    entered, n_late = [], 0
    for arrival, at in enumerate(np.argsort(end_s, kind="stable").tolist()):
        finished = BEGAN + timedelta(seconds=float(end_s[at]))
        run = _run(landed, at, name, completed=bool(ok[at]))
        placer.add(
            StoredRun(
                row=arrival,
                arrival=arrival,
                position=None,
                late=False,
                ordered=True,
                landed_us=to_us(finished),
                run=run,
            )
        )
        placed = placer.ready()
        entered += placed.entered
        n_late += len(placed.late)
    entered += placer.flush().entered
    return [msgspec.structs.replace(one, position=place) for place, one in enumerate(entered)], n_late


def _run(landed, at, name, *, completed):
    started = BEGAN + timedelta(seconds=float(landed.start_s[at]))
    finished = started + timedelta(seconds=float(landed.duration_s[at]))
    return Run(
        id=f"{name}-{at}",
        path="results/all.json",
        offset=at,
        number=at,
        started=started,
        finished=finished,
        seed=None if landed.seed is None else str(landed.seed[at]),
        status="ok" if completed else "failed",
        stage=None if landed.stage is None else str(landed.stage[at]),
        completed=completed,
        cell={"cell": str(landed.cell[at])},
        nuisance={
            "host": f"n{landed.host[at]}",
            "build": f"b{at // 230}",
            "hour": started.strftime("%H"),
        },
        responses={
            "y": float(landed.y[at]),
            "duration": float(landed.duration_s[at]),
            "completed": float(completed),
        },
        metadata={},
        digest=b"",
    )


def audited(scenario, seed):
    """The alarms of one campaign, by the daemon's own path from landed runs on, and its audit."""
    campaign = opened(scenario.more)
    name = "-".join(map(str, seed))
    rng = np.random.default_rng(seed)
    landed = scenario.make(rng)
    entered, _ = entered_runs(campaign, landed, rng.random(landed.y.size) < 0.97, name)
    with campaign.engine.connect() as connection:
        audit = Audit(campaign.plan, connection, 0)
        return audit.advance(entered), audit
