"""What `would_see` states is what the sequential audit shows, in simulation."""

import time

import numpy as np
import pytest
from scipy.stats import binomtest, chi2

from auditd.errors import BadInput
from auditd.schedule import would_see
from auditd.schedule.binomial_bounds import clopper_pearson
from auditd.schedule.power import LOSS_BATCH, _quadratic_needed, _smallest_icc
from auditd.sequential import replay
from auditd.simulate import Autoregressive, BatchEffects, Drift, blocked_layout, simulate

HOSTS = ("h1", "h2", "h3", "h4", "h5")
CELLS = ("a", "b", "c", "d")
REPLICATES = 32
N_RUNS = len(HOSTS) * len(CELLS) * REPLICATES
N_CAMPAIGNS = 120
EFFECTS = {
    "drift": lambda size: Drift(at=0, size=size),
    "icc": lambda size: BatchEffects(icc=size),
    "ar": lambda size: Autoregressive(phi=size),
}


def alarm_share(effect, seed):
    rng = np.random.default_rng(seed)
    n_alarms = 0
    for _ in range(N_CAMPAIGNS):
        layout = blocked_layout(rng, cells=CELLS, hosts=HOSTS, replicates=REPLICATES)
        campaign = simulate(layout, rng, effects=[effect])
        n_alarms += bool(replay(**campaign.arguments(), n_responses=2).alarms)
    return n_alarms / N_CAMPAIGNS


@pytest.mark.parametrize("name", EFFECTS)
def test_stated_effect_is_seen_with_probability_near_080_and_half_of_it_rarely(name):
    """At the stated size 66 to 94 % of campaigns alarm (0.8 within 15 % of the size and three standard errors
    of 120 campaigns), at 45 % of it clearly fewer."""
    stated = would_see(
        N_RUNS - len(CELLS), n_asked=14, level_counts={"host": [N_RUNS // len(HOSTS)] * len(HOSTS)}
    )[name]
    assert 0.66 <= alarm_share(EFFECTS[name](stated), 7) <= 0.94
    assert alarm_share(EFFECTS[name](0.45 * stated), 8) < 0.62


def test_more_runs_and_a_larger_budget_see_smaller_effects():
    counts = {"host": [50, 50, 50, 50]}
    small, large = (would_see(n, n_asked=10, level_counts=counts) for n in (200, 800))
    strict = would_see(200, n_asked=1000, level_counts=counts)
    assert small["drift"] > large["drift"]
    assert small["ar"] > large["ar"]
    assert all(strict[name] > small[name] for name in small)


def test_what_cannot_be_seen_is_none():
    assert would_see(0, n_asked=5) == {"drift": None, "icc": None, "ar": None}
    assert would_see(500, n_asked=5)["icc"] is None
    assert would_see(500, n_asked=5, level_counts={"host": [500]})["icc"] is None
    assert would_see(8, n_asked=50)["ar"] is None


def test_icc_inverts_its_own_statement():
    """P((1 + mθ) χ²(L−1) ≥ Q) = 0.8 at the stated ICC, by scipy's chi-squared."""
    icc = _smallest_icc([40] * 6, 8.0 + LOSS_BATCH, 0.8)
    ratio = icc / (1 - icc)
    assert chi2.sf(_quadratic_needed(5, 8.0 + LOSS_BATCH) / (1 + 40 * ratio), 5) == pytest.approx(
        0.8, abs=1e-9
    )


def test_status_can_afford_it():
    """A call takes less than a millisecond."""
    would_see(5000, n_asked=40, level_counts={"host": [50] * 100})
    begin = time.perf_counter()
    for _ in range(100):
        would_see(5000, n_asked=40, level_counts={"host": [50] * 100})
    assert time.perf_counter() - begin < 0.5


@pytest.mark.parametrize(
    "arguments", [(-1, 5, 0.05, 0.8), (10, 0, 0.05, 0.8), (10, 5, 0.0, 0.8), (10, 5, 0.05, 1.0)]
)
def test_counts_and_probabilities_out_of_range_are_refused(arguments):
    n, n_asked, budget, probability = arguments
    with pytest.raises(BadInput):
        would_see(n, n_asked=n_asked, alarm_budget=budget, probability=probability)


@pytest.mark.parametrize(("n_hits", "n"), [(0, 10), (3, 10), (10, 10), (47, 2000), (1, 1)])
def test_bounds_equal_those_of_the_reference_library(n_hits, n):
    """Against scipy.stats.binomtest's exact interval."""
    reference = binomtest(n_hits, n).proportion_ci(0.95, method="exact")
    assert clopper_pearson(n_hits, n) == pytest.approx((reference.low, reference.high), abs=1e-12)


def test_bounds_refuse_what_is_no_count():
    with pytest.raises(BadInput):
        clopper_pearson(5, 4)
