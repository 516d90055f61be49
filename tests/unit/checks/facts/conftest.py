"""Runs and plans for the facts' tests."""

import datetime as dt
import random

import pytest

from auditd.plan_reading import parse_plan
from auditd.records import Run

START = dt.datetime(2026, 3, 1, tzinfo=dt.UTC)

PLAN = """
[record]
id = "id"
sequence = "seq"
started = "start"
finished = "end"
seed = "seed"
parent = "parent"
[responses.lift]
at = "lift"
[responses.drag]
at = "drag"
[factors]
solver = "solver"
mesh = "mesh"
[nuisance]
host = "host"
build = "build"
[machines]
exclusive = ["host"]
"""


@pytest.fixture
def make_plan():
    """A plan with two responses, two factors, two nuisances and one run a host; text is added at its end."""
    return lambda more="", text=PLAN: parse_plan(text + more)


@pytest.fixture
def make_run():
    """A run with full-precision results, a seed and a host of its own unless said otherwise."""
    rng = random.Random(20260301)

    def make(i, *, cell=None, nuisance=None, responses=None, start_s=None, length_s=50.0, **fields):
        started = START + dt.timedelta(seconds=100.0 * i if start_s is None else start_s)
        stated = {
            "id": f"r{i:04d}",
            "sequence": i,
            "started": started,
            "finished": started + dt.timedelta(seconds=length_s),
            "seed": f"{rng.getrandbits(64)}",
        }
        return Run(
            path="runs.ndjson",
            offset=100 * i,
            number=i,
            cell={"solver": "implicit", "mesh": "fine"} | (cell or {}),
            nuisance={"host": "n1", "build": "b1"} | (nuisance or {}),
            responses={"lift": rng.gauss(1, 0.1), "drag": rng.gauss(5, 2)}
            if responses is None
            else responses,
            metadata={},
            digest=i.to_bytes(8, "big"),
            **(stated | fields),
        )

    return make


@pytest.fixture
def tell():
    """Tell a fact of runs, each placed as it lands; return the last finding of each key."""

    def told(fact, runs, *, place=True):
        found = {}
        for n, run in enumerate(runs):
            answers = [*fact.arrived(run, n), *(fact.placed(run, n) if place else ())]
            found |= {finding.key: finding for finding in answers}
        return found | {finding.key: finding for finding in fact.standing()}

    return told
