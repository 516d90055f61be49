"""Effects: what is planted is recovered, and intervals cover about as often as they say."""

import numpy as np
import pytest
from run_tables import table_of

from auditd.pipeline.effects import effect_of
from auditd.plan_reading import parse_plan
from auditd.records import Finding

PLAN = parse_plan('[responses.y]\nat = "y"\n[factors]\nc = "c"\n[nuisance]\nhost = "h"\n')
N = 600
CELLS = [{"c": "a" if k % 2 else "b"} for k in range(N)]
OWN = np.array([3.0 if k % 2 else -1.0 for k in range(N)])
HOSTS = [f"n{k % 5}" for k in range(N)]
N_TRIALS = 120
LOWEST = 103
"""Of 120 intervals at 95 % fewer cover with probability 0.0002 (binomial)."""


def finding(kind, **fields):
    stated = {"along": "order", "response": "y", "since": 300, "index": 330, "key": "k", "message": ""}
    return Finding(kind=kind, **(stated | fields))


def shifted(rng):
    return finding("drift"), rng.normal(size=N) + 1.2 * (np.arange(N) >= 300), {}, 1.2


def shifted_on_a_host(rng):
    there = np.array([host == "n3" for host in HOSTS]) & (np.arange(N) >= 300)
    return finding("drift", along="host", level="n3"), rng.normal(size=N) + 1.5 * there, {}, 1.5


def autocorrelated(rng):
    y = rng.normal(size=N)
    for k in range(1, N):
        y[k] = 0.5 * y[k - 1] + np.sqrt(0.75) * y[k]
    return finding("serial", since=0, index=10), y, {}, 0.5


def scattered(rng):
    return finding("spread"), rng.normal(size=N) * np.where(np.arange(N) >= 300, 2.0, 1.0), {}, 2.0


def cyclic(rng):
    hours = 600.0 * np.arange(N) / 86_400
    return finding("clock", since=0), rng.normal(size=N) + 0.8 * np.sin(2 * np.pi * hours + 1), {}, 0.8


def inherited(rng):
    y = rng.normal(size=N)
    parents = np.full(N, -1)
    child = np.arange(100, N)
    parents[child] = child - 100
    for k in child:
        y[k] = 0.6 * y[parents[k]] + 0.8 * y[k]
    return finding("lineage", since=0), y, {"parents": parents}, 0.6


CASES = (shifted, shifted_on_a_host, autocorrelated, scattered, cyclic, inherited)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.__name__)
def test_what_is_planted_is_recovered_and_covered(case):
    """The mean of the estimates is near the truth, and intervals hold it about 95 times in 100."""
    rng = np.random.default_rng(20)
    values, n_held = [], 0
    for _ in range(N_TRIALS):
        one, y, changed, truth = case(rng)
        effect = effect_of(
            one, table_of({"y": y + OWN}, cells=CELLS, nuisance={"host": HOSTS}, **changed), PLAN
        )
        values.append(effect.value)
        n_held += effect.low <= truth <= effect.high
    assert np.mean(values) == pytest.approx(truth, rel=0.08)
    assert n_held >= LOWEST


def test_a_host_effect_is_an_intraclass_correlation():
    """Variance 1 between and 1 within hosts is an intraclass correlation of one half."""
    rng = np.random.default_rng(5)
    found = []
    for _ in range(40):
        hosts = [f"n{k % 40}" for k in range(N)]
        effects = dict(zip(sorted(set(hosts)), rng.normal(size=40), strict=True))
        y = rng.normal(size=N) + [effects[host] for host in hosts]
        table = table_of({"y": y}, nuisance={"host": hosts})
        found.append(effect_of(finding("batch", along="host"), table, PLAN))
    assert np.mean([one.value for one in found]) == pytest.approx(0.5, abs=0.04)
    assert sum(one.low <= 0.5 <= one.high for one in found) >= 33


@pytest.mark.parametrize(
    ("kind", "fields", "n"),
    [
        ("drift", {}, 5),
        ("drift", {"since": 3, "index": 4}, 40),
        ("batch", {"along": "order"}, 40),
        ("lineage", {}, 40),
        ("drift", {"since": None}, 40),
        ("drift", {"response": None}, 40),
    ],
)
def test_too_little_gives_no_effect_instead_of_a_number(kind, fields, n):
    """With too few runs, on no level, or without a date there is no effect, and no warning of NumPy."""
    one = finding(kind, **({"since": 20, "index": 25} | fields))
    assert effect_of(one, table_of({"y": np.arange(float(n))}), PLAN) is None


@pytest.mark.parametrize("kind", ["drift", "serial", "spread", "clock", "batch", "lineage"])
def test_constant_values_give_no_nonsense(kind):
    """A response that never varies gives a finite effect or none."""
    table = table_of(
        {"y": np.full(60, 2.5)}, nuisance={"host": HOSTS[:60]}, parents=np.concatenate([[-1], np.arange(59)])
    )
    along = "host" if kind == "batch" else "order"
    effect = effect_of(finding(kind, along=along, since=30, index=35), table, PLAN)
    if effect is not None:
        assert np.isfinite([effect.value, effect.low, effect.high]).all()
