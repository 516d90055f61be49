"""Levels in random order, and not."""

import math
import random
from itertools import permutations

import pytest

from auditd.checks.facts.clumping_e import ClumpingE
from auditd.checks.facts.counting import n_counting, threshold_log_e
from auditd.checks.facts.order import OrderFact, landing_order_finding, late_finding


def _runs(make_run, solvers):
    rng = random.Random(14)
    return [make_run(i, cell={"solver": s, "mesh": rng.choice("ab")}) for i, s in enumerate(solvers)]


def test_all_of_one_level_before_all_of_the_other_is_told(make_plan, make_run, tell):
    """Forty runs of A, then forty of B: told within twenty runs of B, in these words."""
    fact = OrderFact(make_plan(), alarm_budget=0.005)
    (found,) = tell(fact, _runs(make_run, ["A"] * 40 + ["B"] * 40)).values()
    assert (found.key, found.along) == ("order:solver", "solver")
    assert 40 <= found.index < 60
    assert found.log_e >= found.threshold
    assert "every run of A came before every run of B" in found.message


def test_long_stretches_are_told_with_the_share_of_like_neighbours(make_plan, make_run, tell):
    """Stretches of five runs of one of two levels: four in five neighbours and more are alike."""
    rng = random.Random(15)
    solvers = [s for _ in range(60) for s in [rng.choice("AB")] * 5]
    found = tell(OrderFact(make_plan(), alarm_budget=0.005), _runs(make_run, solvers))["order:solver"]
    assert "would by chance" in found.message
    assert found.share > 0.8


@pytest.mark.parametrize("seed", range(5))
def test_random_and_blocked_orders_are_silent(make_plan, make_run, tell, seed):
    """A random order, a randomised complete-block one, strict alternation, and one level only."""
    rng = random.Random(seed)
    orders = [
        [rng.choice("AB") for _ in range(500)],
        [s for _ in range(150) for s in rng.sample("ABC", 3)],
        ["A", "B"] * 250,
        ["A"] * 300,
    ]
    for solvers in orders:
        assert not tell(OrderFact(make_plan(), alarm_budget=0.005), _runs(make_run, solvers))


def test_a_sorted_part_is_found_after_thousands_of_random_runs(make_plan, make_run, tell):
    """The part of the stake for a later segment suffices."""
    rng = random.Random(16)
    solvers = [rng.choice("AB") for _ in range(5000)] + ["A"] * 60 + ["B"] * 60
    found = tell(OrderFact(make_plan(), alarm_budget=0.005), _runs(make_run, solvers))["order:solver"]
    assert found.index >= 5000


@pytest.mark.parametrize("levels", ["AAABBB", "AABBCC", "AAAAAB", "ABCDEF", "AABBBC"])
def test_the_mean_wealth_over_all_orders_is_at_most_one(levels):
    """Exact, by counting: over every order of the same levels the e-value averages to 1 or less."""
    wealth = []
    for order in permutations(levels):
        numbers, e = {}, ClumpingE()
        for level in order:
            last = e.observe(numbers.setdefault(level, len(numbers)))
        wealth.append(last)
    assert sum(wealth) / len(wealth) <= 1 + 1e-9


def test_the_highest_wealth_keeps_villes_bound_over_random_orders():
    """Ville (1939): the largest wealth over 400 runs reaches c in at most 1/c of 1,500 random orders."""
    rng = random.Random(17)
    reached = 0
    for _ in range(1500):
        e = ClumpingE()
        numbers = {}
        reached += any(e.observe(numbers.setdefault(rng.randrange(2), len(numbers))) >= 5 for _ in range(400))
    assert reached <= 1500 / 5


def test_the_threshold_is_that_of_the_union_over_all_counting_facts(make_plan):
    """Two factors, no status: K = 2. With a status: cells, two nuisances and the order besides, K = 6."""
    assert n_counting(make_plan()) == 2
    assert threshold_log_e(make_plan(), 0.005) == pytest.approx(math.log(2 / 0.005))
    with_status = make_plan().text.replace('id = "id"', 'id = "id"\nstatus = "status"')
    assert n_counting(make_plan(text=with_status)) == 6


def test_late_runs_are_told_above_half_a_percent_and_landing_order_when_it_goes_with_results():
    """The two other findings about the order."""
    assert late_finding(n_late=6, n=1000, run="r9").holds
    assert not late_finding(n_late=5, n=1000, run="r9").holds
    found = landing_order_finding(response="lift", pvalue=1e-9, correlation=0.4, n=300)
    assert "landing order depends on the outcome" in found.message
