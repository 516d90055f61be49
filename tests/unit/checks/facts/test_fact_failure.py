"""Failures here and there, and all in one place."""

import random
from itertools import permutations

import pytest

from auditd.checks.facts.failing_e import FailingLevelsE, FailingStretchE, Outcomes
from auditd.checks.facts.failure import FailureFact

STATUS = """
[record]
status = "status"
[responses.lift]
at = "lift"
[factors]
solver = "solver"
[nuisance]
host = "host"
"""


def _runs(make_run, n, fails, seed=18):
    rng = random.Random(seed)
    runs = []
    for i in range(n):
        cell, host = {"solver": rng.choice(["a", "b", "c"])}, f"n{i % 4}"
        runs.append(
            make_run(i, cell=cell, nuisance={"host": host}, completed=rng.random() >= fails(i, cell, host))
        )
    return runs


def test_failures_on_one_host_are_told_with_the_host(make_plan, make_run, tell):
    """One in four runs fails on n2, one in a hundred elsewhere."""
    runs = _runs(make_run, 600, lambda _i, _cell, host: 0.25 if host == "n2" else 0.01)
    found = tell(FailureFact(make_plan(text=STATUS), alarm_budget=0.005), runs)
    assert (found["failure:host"].along, found["failure:host"].level) == ("host", "n2")
    assert found["failure:host"].log_e >= found["failure:host"].threshold
    assert "failed" in found["failure:host"].message


def test_failures_in_one_cell_are_told_with_the_cell(make_plan, make_run, tell):
    """Solver c fails in a fifth of its runs."""
    runs = _runs(make_run, 600, lambda _i, cell, _host: 0.2 if cell["solver"] == "c" else 0.005)
    found = tell(FailureFact(make_plan(text=STATUS), alarm_budget=0.005), runs)["failure:cell"]
    assert found.cells == ("solver=c mesh=fine",)


def test_a_short_spell_of_failures_is_told_with_its_ends(make_plan, make_run, tell):
    """Two in three of the runs 400 to 440 fail; the stretch that is named lies there."""
    runs = _runs(make_run, 700, lambda i, _cell, _host: 0.66 if 400 <= i < 440 else 0.01)
    found = tell(FailureFact(make_plan(text=STATUS), alarm_budget=0.005), runs)["failure:order"]
    assert 400 <= found.since <= 405
    assert 400 <= found.index < 425
    assert 15 <= found.n_again <= 40


@pytest.mark.parametrize("rate", [0.0, 0.004, 0.03, 0.3])
def test_failures_here_and_there_are_silent(make_plan, make_run, tell, rate):
    """One rate everywhere, whatever it is."""
    for seed in range(4):
        runs = _runs(make_run, 500, lambda *_: rate, seed)
        assert not tell(FailureFact(make_plan(text=STATUS), alarm_budget=0.005), runs)


def test_without_a_status_nothing_is_asked(make_plan, make_run, tell):
    """Where no status is stated every run counts as completed."""
    runs = _runs(make_run, 300, lambda i, *_: float(i > 200))
    assert not tell(FailureFact(make_plan(), alarm_budget=0.005), runs)


@pytest.mark.parametrize("failures", ["1110000", "1100000", "1111000", "1000000"])
def test_the_mean_wealth_over_all_orders_of_failures_is_at_most_one(failures):
    """Exact, by counting: over every order of the same outcomes both e-values average to 1 or less."""
    by_level, by_stretch = [], []
    for order in set(permutations(failures)):
        outcomes, levels, stretch = Outcomes(), FailingLevelsE(), FailingStretchE()
        for i, outcome in enumerate(order):
            failed = outcome == "1"
            outcomes.take(failed=failed)
            a = levels.observe(min(i % 3, 1) if i else 0, outcomes, failed=failed)
            b = stretch.observe(outcomes, failed=failed)
        by_level.append(a)
        by_stretch.append(b)
    assert sum(by_level) / len(by_level) <= 1 + 1e-9
    assert sum(by_stretch) / len(by_stretch) <= 1 + 1e-9
