"""Findings and a plan for the verdicts' tests."""

import datetime as dt

import pytest

from auditd.plan_reading import parse_plan
from auditd.records import Effect, Finding
from auditd.verdicts.moments import Moment

START = dt.datetime(2026, 5, 12, 14, 7, tzinfo=dt.UTC)


@pytest.fixture
def plan():
    """A plan with one response, two nuisances and a comparison."""
    return parse_plan("""
[record]
seed = "seed"
started = "start"
[responses.lift]
at = "lift"
margin = 0.1
[factors]
solver = "solver"
[nuisance]
host = "host"
build = "build"
[[comparisons]]
response = "lift"
between = [{solver = "a"}, {solver = "b"}]
""")


@pytest.fixture
def make_finding():
    """A drift of `lift` on host n3 since position 212, unless said otherwise."""

    def make(kind="drift", along="host", level="n3", **fields):
        stated = {
            "key": f"audit:1:lift:{kind}:{along}:{level}",
            "message": "",
            "response": "lift",
            "run": "r0230",
            "index": 230,
            "n": 400,
            "since": 212,
            "since_low": 205,
            "since_high": 220,
            "log_e": 7.0,
            "effect": Effect(name="shift", value=0.8, low=0.5, high=1.1),
        }
        return Finding(kind=kind, along=along, level=level, **(stated | fields))

    return make


@pytest.fixture
def moment():
    """Run r<position> at a hundred seconds a run."""
    return lambda position: Moment(
        run=f"r{position:04d}", position=position, at=START + dt.timedelta(seconds=100 * (position - 412))
    )
