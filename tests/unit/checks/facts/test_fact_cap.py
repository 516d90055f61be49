"""Values at one extreme."""

import random

import pytest

from auditd.checks.facts.cap import CapFact


def _found(make_plan, make_run, tell, draw, n=600):
    rng = random.Random(11)
    runs = [make_run(i, responses={"lift": draw(rng)}) for i in range(n)]
    return tell(CapFact(make_plan(), alarm_budget=0.01), runs)


def test_a_time_limit_that_many_runs_meet_is_told(make_plan, make_run, tell):
    """One in sixteen values is exactly the limit, all others are below and distinct."""
    (found,) = _found(make_plan, make_run, tell, lambda rng: min(rng.gauss(100, 10), 115.0)).values()
    assert (found.kind, found.response) == ("cap", "lift")
    assert "exactly 115" in found.message
    assert found.share == pytest.approx(0.067, abs=0.03)


def test_a_floor_is_told_too(make_plan, make_run, tell):
    """Values below the detection limit were set to it."""
    (found,) = _found(make_plan, make_run, tell, lambda rng: max(rng.gauss(0, 1), -1.0)).values()
    assert "smallest" in found.message


@pytest.mark.parametrize(
    "draw",
    [
        lambda rng: rng.gauss(0, 1),
        lambda rng: round(rng.gauss(0, 1), 1),
        lambda rng: round(rng.expovariate(1), 1),
        lambda rng: float(rng.randrange(40)),
        lambda rng: float(min(rng.randrange(1, 7), 6)),
        lambda rng: round(rng.lognormvariate(0, 1.5), 1),
        lambda rng: rng.paretovariate(1.2),
    ],
    ids=[
        "normal",
        "coarse normal",
        "coarse exponential",
        "counts",
        "ratings",
        "coarse lognormal",
        "heavy tail",
    ],
)
def test_ties_on_a_coarse_grid_and_fine_values_are_silent(make_plan, make_run, tell, draw):
    """A grid's other points come back as well as its end, and a rating has few points."""
    assert not _found(make_plan, make_run, tell, draw, 2500)


def test_a_cap_that_comes_late_is_seen(make_plan, make_run, tell):
    """After 2,500 runs a queue limit is set at 1, far below the largest value so far."""
    rng = random.Random(12)
    draw = [min(rng.gauss(0, 1), 1.0) if i > 2500 else rng.gauss(0, 1) for i in range(4500)]
    runs = [make_run(i, responses={"lift": value}) for i, value in enumerate(draw)]
    (found,) = tell(CapFact(make_plan(), alarm_budget=0.01), runs).values()
    assert int(found.run[1:]) > 2500


def test_failed_runs_and_nan_are_left_out(make_plan, make_run, tell):
    """A run that was killed at the limit did not complete, and NaN is no extreme."""
    rng = random.Random(13)
    runs = [
        make_run(i, responses={"lift": 9.0 if i % 5 == 0 else rng.random()}, completed=i % 5 > 0)
        for i in range(400)
    ]
    runs += [make_run(400 + i, responses={"lift": float("nan")}) for i in range(100)]
    assert not tell(CapFact(make_plan(), alarm_budget=0.01), runs)
