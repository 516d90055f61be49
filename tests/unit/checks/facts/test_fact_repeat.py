"""Results that are equal to the last digit, and those that only look so."""

import random

import pytest

from auditd.checks.facts.repeat import RepeatFact
from auditd.checks.facts.resolution import Resolution
from auditd.verdicts.remedy import remedy

CELLS = [{"solver": s, "mesh": m} for s in ("implicit", "explicit") for m in ("fine", "coarse")]
ONE_RESPONSE = """
[record]
seed = "seed"
[responses.score]
at = "score"
[factors]
solver = "solver"
"""


def _campaign(make_run, n, values=None):
    return [
        make_run(i, cell=CELLS[i % 4], **({} if values is None else {"responses": values(i)}))
        for i in range(n)
    ]


def test_a_cache_that_answers_twice_is_told_with_both_runs(make_plan, make_run, tell):
    """One run repeats another's results under a seed of its own."""
    runs = _campaign(make_run, 80)
    runs.append(make_run(80, cell=CELLS[0], responses=runs[20].responses))
    (found,) = tell(RepeatFact(make_plan(), alarm_budget=0.01), runs).values()
    assert (found.key, found.run, found.n_again) == ("repeat:answer:1", "r0080", 1)
    assert "r0020" in found.message
    assert "a cache that answers twice" in found.message
    assert "cache" in remedy(found, make_plan())
    assert found.share == pytest.approx(1 / 81)


def test_a_seed_that_is_ignored_in_one_cell_is_told_apart_from_a_cache(make_plan, make_run, tell):
    """All runs of one cell are equal, each under its own seed: message and remedy name the cell."""
    fixed = {"lift": 1.0234567891234, "drag": 4.987654321}
    runs = [make_run(i, cell=CELLS[i % 4], responses=fixed if i % 4 == 2 else None) for i in range(80)]
    (found,) = tell(RepeatFact(make_plan(), alarm_budget=0.01), runs).values()
    assert found.cells == ("solver=explicit mesh=fine",)
    assert (found.n, found.n_again) == (20, 19)
    assert "an ignored seed in one configuration" in found.message
    assert "how the seed reaches the program in solver=explicit mesh=fine" in remedy(found, make_plan())


def test_a_repeat_of_the_run_before_turns_into_a_cache_when_the_cell_goes_on(make_plan, make_run, tell):
    """Two equal runs in a row look like an ignored seed until a third one differs."""
    runs = _campaign(make_run, 60)
    runs.append(make_run(60, cell=CELLS[0], responses=runs[56].responses))
    fact = RepeatFact(make_plan(), alarm_budget=0.01)
    (found,) = tell(fact, runs).values()
    assert "an ignored seed" in found.message
    (found,) = tell(fact, [make_run(61, cell=CELLS[0])]).values()
    assert "a cache that answers twice" in found.message


def test_a_factor_that_is_not_used_gives_equal_results_under_one_seed(make_plan, make_run, tell):
    """Cells that agree under common random numbers point at the factor between them."""
    runs = []
    for i in range(0, 60, 2):
        first = make_run(i, cell=CELLS[0])
        runs += [first, make_run(i + 1, cell=CELLS[1], seed=first.seed, responses=first.responses)]
    (found,) = tell(RepeatFact(make_plan('\n[seeds]\nrole = "block"\n'), alarm_budget=0.01), runs).values()
    assert found.key.startswith("repeat:factor")
    assert "a factor between these cells that is not used" in found.message


def test_the_same_seed_in_the_same_cell_is_no_repeat(make_plan, make_run, tell):
    """Equal results under an equal seed are what a deterministic program owes; `seed` tells of the seed."""
    runs = _campaign(make_run, 60)
    runs.append(make_run(60, cell=CELLS[0], seed=runs[20].seed, responses=runs[20].responses))
    assert not tell(RepeatFact(make_plan(), alarm_budget=0.01), runs)


def test_cells_known_to_be_deterministic_are_left_out(make_plan, make_run, tell):
    """design.deterministic names cells whose results are equal by nature."""
    plan = make_plan('\n[design]\ndeterministic = [{solver = "implicit"}]\n')
    fixed = {"lift": 1.0234567891234, "drag": 4.987654321}
    runs = [make_run(i, responses=fixed) for i in range(30)]
    assert not tell(RepeatFact(plan, alarm_budget=0.01), runs)
    assert tell(RepeatFact(make_plan(), alarm_budget=0.01), runs)


@pytest.mark.parametrize(
    "values",
    [
        lambda rng: {"score": round(rng.gauss(0, 1), 1)},
        lambda rng: {"score": rng.randrange(900, 1000) / 1319},
        lambda rng: {"score": round(rng.gauss(0, 1), 3)},
        lambda rng: {"score": float(rng.randrange(5))},
        lambda rng: {"score": 0.25 * rng.randrange(40)},
    ],
    ids=["one decimal", "shares of 1319 items", "three decimals", "ratings", "quarters"],
)
def test_ties_on_a_coarse_grid_are_no_repeats(make_plan, make_run, tell, values):
    """Where chance makes equal values, equal values say nothing."""
    rng = random.Random(5)
    runs = [make_run(i, responses=values(rng)) for i in range(600)]
    assert len({run.responses["score"] for run in runs}) < 590
    assert not tell(RepeatFact(make_plan(text=ONE_RESPONSE), alarm_budget=0.01), runs)


def test_values_that_come_back_by_themselves_do_not_count_as_fine(make_plan, make_run, tell):
    """Runs that meet the same cap in one response and a coarse grid in the other are no repeats."""
    rng = random.Random(6)
    runs = _campaign(
        make_run,
        800,
        lambda i: {"lift": min(rng.gauss(1, 0.1), 1.0312345678912), "drag": float(rng.randrange(50))},
    )
    assert not tell(RepeatFact(make_plan(), alarm_budget=0.01), runs)


def test_runs_without_all_responses_or_with_nan_are_not_compared(make_plan, make_run, tell):
    """Nothing can be said of what is not there; failed runs are not compared either."""
    odd = [{"lift": 1.0234567891234}, {"lift": 1.0234567891234, "drag": float("nan")}]
    runs = _campaign(make_run, 40) + [make_run(40 + i, responses=odd[i % 2]) for i in range(8)]
    fixed = {"lift": 1.0234567891234, "drag": 4.987654321}
    runs += [make_run(60 + i, responses=fixed, completed=False) for i in range(8)]
    assert not tell(RepeatFact(make_plan(), alarm_budget=0.01), runs)


def test_a_larger_horizon_asks_for_finer_digits(make_plan, make_run, tell):
    """Over more pairs chance has more occasions: what counts among 100 may not among 10 million."""
    rng = random.Random(7)
    runs = _campaign(
        make_run, 100, lambda _: {"lift": round(rng.random(), 6), "drag": round(rng.random(), 6)}
    )
    runs.append(make_run(100, responses=runs[50].responses))
    assert tell(RepeatFact(make_plan(), alarm_budget=0.01), runs)
    wide = make_plan("\n[campaign]\nhorizon = 10000000\n")
    assert not tell(RepeatFact(wide, alarm_budget=0.01), runs)


def test_chance_agrees_with_counted_collisions_of_rounded_normal_values():
    """The formula d / (2 √π s) against the share of equal pairs counted in 4,000 values on a grid of 0.01."""
    rng = random.Random(8)
    resolution = Resolution(1)
    values = [round(rng.gauss(0, 1), 2) for _ in range(4000)]
    for value in values:
        resolution.take(0, (value,))
    counts = {}
    for value in values:
        counts[value] = counts.get(value, 0) + 1
    counted = sum(n * (n - 1) for n in counts.values()) / (4000 * 3999)
    assert resolution.chance((0.33,)) == pytest.approx(counted, rel=0.2)


def test_responses_that_tell_each_other_count_once():
    """A second response that is the first in another unit adds no digits."""
    rng = random.Random(9)
    alone, doubled, apart = Resolution(1), Resolution(2), Resolution(2)
    for _ in range(300):
        x, y = round(rng.gauss(0, 1), 3), round(rng.gauss(0, 1), 3)
        alone.take(0, (x,))
        doubled.take(0, (x, round(3 * x, 3)))
        apart.take(0, (x, y))
    assert doubled.chance((0.123, 0.369)) == pytest.approx(alone.chance((0.123,)), rel=0.3)
    assert apart.chance((0.123, 0.369)) < 0.01 * alone.chance((0.123,))
