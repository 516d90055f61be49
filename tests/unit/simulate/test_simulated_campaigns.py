"""Simulated campaigns have the laws, layouts and faults that they state."""

import collections

import numpy as np
import pytest
from scipy import stats

from auditd.errors import BadInput
from auditd.sequential import replay
from auditd.simulate import (
    LAWS,
    Autoregressive,
    BatchEffects,
    CachedResults,
    DailyCycle,
    Drift,
    Failures,
    IgnoredSeed,
    LevelShift,
    RestartLineage,
    SeedBlocks,
    SpreadJump,
    StepShift,
    blocked_layout,
    sequential_layout,
    simulate,
    sweep_layout,
)

CELLS, HOSTS = ("a", "b", "c", "d"), ("h1", "h2", "h3")
SMALLEST_P = 1e-6


@pytest.fixture
def rng():
    return np.random.default_rng(20260101)


@pytest.fixture
def layout(rng):
    return blocked_layout(rng, cells=CELLS, hosts=HOSTS, replicates=400)


def lag_one(x):
    return float(np.corrcoef(x[:-1], x[1:])[0, 1])


def test_blocked_layout_is_balanced_in_every_block(layout):
    for host in HOSTS:
        own = layout.cells[layout.nuisance["host"] == host].reshape(-1, len(CELLS))
        assert all(set(block) == set(CELLS) for block in own.tolist())
        assert len({tuple(block) for block in own.tolist()}) == 24
    assert np.all(np.diff(layout.times) > 0)


def test_sequential_layout_has_all_of_a_before_b_and_balanced_hosts(rng):
    made = sequential_layout(rng, cells=CELLS, hosts=HOSTS, replicates=5)
    assert made.cells.tolist() == sorted(made.cells.tolist())
    pairs = collections.Counter(zip(made.cells.tolist(), made.nuisance["host"].tolist(), strict=True))
    assert set(pairs.values()) == {5}


@pytest.mark.parametrize("hosts", [("h1", "h2", "h3"), ("h1", "h2"), ("h1", "h2", "h3", "h4", "h5", "h6")])
def test_sweep_goes_through_the_cells_in_turn_and_every_host_meets_every_cell_alike(hosts):
    made = sweep_layout(cells=CELLS, hosts=hosts, replicates=6)
    assert made.cells.tolist()[:8] == [*CELLS, *CELLS]
    assert made.n == 24 * len(hosts)
    pairs = collections.Counter(zip(made.cells.tolist(), made.nuisance["host"].tolist(), strict=True))
    assert len(pairs) == len(CELLS) * len(hosts)
    assert set(pairs.values()) == {6}


@pytest.mark.parametrize(
    ("law", "reference"),
    [
        ("normal", stats.norm()),
        ("t", stats.t(2.2)),
        ("lognormal", stats.lognorm(1.0, loc=-np.exp(0.5))),
    ],
)
def test_laws_are_those_of_the_reference_library(layout, rng, law, reference):
    """Kolmogorov–Smirnov against scipy.stats; lognormal errors have mean zero."""
    values = simulate(layout, rng, law=law).values
    assert stats.kstest(values, reference.cdf).pvalue > SMALLEST_P
    assert stats.kstest(values + 0.2, reference.cdf).pvalue < SMALLEST_P


def test_extreme_latent_values_keep_the_heavy_tails_quantiles():
    """Against scipy.stats.t at ±8 standard deviations, where 1 − p has no digits left."""
    z = np.array([-8.0, -1.0, 0.0, 1.0, 8.0])
    expected = stats.t(2.2).isf(stats.norm.sf(np.abs(z))) * np.sign(z)
    assert LAWS["t"](z, np.zeros(5, dtype=int)) == pytest.approx(expected, rel=1e-9)


def test_coarse_law_has_ties_and_unequal_law_unequal_spreads(layout, rng):
    assert len(set(simulate(layout, rng, law="coarse").values.tolist())) < 30
    unequal = simulate(layout, rng, law="unequal")
    spreads = [unequal.values[unequal.cells == cell].std() for cell in CELLS]
    assert spreads == pytest.approx([0.3, 1.0, 3.0, 10.0], rel=0.1)


def test_cell_means_are_added(layout, rng):
    made = simulate(layout, rng, cell_means={"b": 100.0})
    assert made.values[made.cells == "b"].mean() == pytest.approx(100, abs=0.2)
    assert made.values[made.cells == "a"].mean() == pytest.approx(0, abs=0.2)
    assert made.cell_means["b"] == 100.0


@pytest.mark.parametrize("phi", [-0.5, 0.6, 0.95])
def test_autoregressive_errors_have_their_coefficient_and_unit_variance(layout, rng, phi):
    made = simulate(layout, rng, effects=[Autoregressive(phi=phi)])
    assert lag_one(made.values) == pytest.approx(phi, abs=0.06)
    short = blocked_layout(rng, cells=CELLS, hosts=HOSTS, replicates=1)
    starts = [simulate(short, rng, effects=[Autoregressive(phi=phi)]).values[0] for _ in range(300)]
    assert np.var(starts) == pytest.approx(1.0, abs=0.35)
    assert (made.truth[0].kind, made.truth[0].along) == ("serial", "order")


def test_autoregressive_errors_within_hosts_are_invisible_across_them(layout, rng):
    made = simulate(layout, rng, effects=[Autoregressive(phi=0.8, along="host")])
    own = made.values[made.nuisance["host"] == "h2"]
    assert lag_one(own) == pytest.approx(0.8, abs=0.06)
    firsts = [made.values[made.nuisance["host"] == host][:1600] for host in HOSTS[:2]]
    assert abs(np.corrcoef(*firsts)[0, 1]) < 0.25


def test_level_effects_have_their_intraclass_correlation(rng):
    hosts = tuple(f"h{i}" for i in range(200))
    made = simulate(
        blocked_layout(rng, cells=CELLS, hosts=hosts, replicates=5), rng, effects=[BatchEffects(icc=0.4)]
    )
    means = [made.values[made.nuisance["host"] == host].mean() for host in hosts]
    assert np.var(means) == pytest.approx(0.4 + 0.6 / 20, rel=0.35)
    assert np.var(made.values) == pytest.approx(1.0, rel=0.2)


def test_shift_step_and_drift_touch_only_their_runs(layout, rng):
    n, host = layout.n, layout.nuisance["host"]
    effects = [
        LevelShift(size=50, along="host", level="h1"),
        StepShift(at=2000, size=500, along="host", level="h2"),
        Drift(at=2400, size=5000, along="host", level="h3"),
    ]
    made = simulate(layout, rng, effects=effects)
    late = np.arange(n) >= 2000
    assert made.values[host == "h1"].mean() == pytest.approx(50, abs=1)
    assert np.abs(made.values[(host == "h2") & ~late]).max() < 6
    assert made.values[(host == "h2") & late].min() > 490
    own = np.flatnonzero((host == "h3") & (np.arange(n) >= 2400))
    line = 5000 * (own - 2400) / (n - 1 - 2400)
    assert np.abs(made.values[own] - line).max() < 6
    assert [(fault.kind, fault.level) for fault in made.truth] == [
        ("batch", "h1"),
        ("drift", "h2"),
        ("drift", "h3"),
    ]
    assert all(host[fault.index] == fault.level for fault in made.truth)


def test_daily_cycle_is_found_by_its_period(layout, rng):
    made = simulate(layout, rng, effects=[DailyCycle(amplitude=3.0)])
    angle = 2 * np.pi * made.times / 86400
    design = np.column_stack([np.ones(made.values.size), np.sin(angle), np.cos(angle)])
    beta = np.linalg.lstsq(design, made.values, rcond=None)[0]
    assert np.hypot(*beta[1:]) == pytest.approx(3.0, abs=0.15)


def test_spread_change_stretches_later_errors(layout, rng):
    made = simulate(layout, rng, effects=[SpreadJump(at=2400, ratio=3.0)])
    assert made.values[2400:].std() / made.values[:2400].std() == pytest.approx(3.0, rel=0.1)


def test_seed_blocks_share_seed_and_error_between_cells(layout, rng):
    made = simulate(layout, rng, effects=[SeedBlocks(correlation=0.9)])
    by_seed = collections.defaultdict(list)
    for i, seed in enumerate(made.seeds):
        by_seed[seed].append(i)
    assert {len(runs) for runs in by_seed.values()} == {len(CELLS)}
    assert all(set(made.cells[runs]) == set(CELLS) for runs in by_seed.values())
    table = np.array([made.values[runs] for runs in by_seed.values()])
    assert table.mean(axis=1).var() == pytest.approx(0.9 + 0.1 / 4, rel=0.2)
    assert made.truth == ()


def test_restart_lineage_inherits_from_earlier_runs_of_the_cell(layout, rng):
    made = simulate(layout, rng, effects=[RestartLineage(share=0.5, phi=0.8)])
    children = np.flatnonzero(made.parents >= 0)
    parents = made.parents[children]
    assert children.size / layout.n == pytest.approx(0.5, abs=0.05)
    assert np.all(parents < children)
    assert np.all(made.cells[parents] == made.cells[children])
    assert np.corrcoef(made.values[parents], made.values[children])[0, 1] == pytest.approx(0.8, abs=0.05)
    assert "parents" in made.arguments()
    assert "parents" not in simulate(layout, rng).arguments()


def test_failures_take_the_result_within_their_stretch_only(layout, rng):
    made = simulate(layout, rng, effects=[Failures(at=1000, until=1200, probability=0.5)])
    failed = np.flatnonzero(~made.completed)
    assert failed.size == pytest.approx(100, abs=35)
    assert failed.min() >= 1000
    assert failed.max() < 1200
    assert np.array_equal(np.isnan(made.values), ~made.completed)


def test_ignored_seed_and_cache_repeat_to_the_last_digit(layout, rng):
    own = np.flatnonzero(layout.cells == "b")
    pair = (int(own[3]), int(own[40]))
    cached = simulate(layout, rng, effects=[CachedResults(pairs=(pair,))])
    assert cached.values[pair[0]] == cached.values[pair[1]]
    assert len(set(cached.values.tolist())) == layout.n - 1
    ignored = simulate(layout, rng, effects=[IgnoredSeed(cell="b")])
    assert len(set(ignored.values[own].tolist())) == 1
    assert len(set(ignored.seeds)) == layout.n


def test_arguments_run_through_the_audit_and_the_fault_alarms(layout, rng):
    clean = replay(**simulate(layout, rng).arguments(), alarm_budget=1e-4)
    faulty = replay(**simulate(layout, rng, effects=[Autoregressive(phi=0.5)]).arguments(), alarm_budget=1e-4)
    assert clean.alarms == []
    assert faulty.alarms[0].kind == "serial"


def test_one_seed_gives_one_campaign(layout):
    once, again = (
        simulate(layout, np.random.default_rng(5), effects=[BatchEffects(icc=0.1)]) for _ in range(2)
    )
    other = simulate(layout, np.random.default_rng(6))
    assert np.array_equal(once.values, again.values)
    assert once.seeds == again.seeds
    assert not np.array_equal(once.values, other.values)
    assert len(set(once.seeds)) == layout.n


@pytest.mark.parametrize(
    ("effect", "message"),
    [
        (Autoregressive(phi=1.0), "phi is 1.0"),
        (BatchEffects(icc=1.0), "icc is 1.0"),
        (BatchEffects(icc=0.1, along="rack"), "no nuisance"),
        (StepShift(at=10**6, size=1.0), "no run of order"),
        (LevelShift(size=1.0, along="host", level="h9"), "no run of host=h9"),
        (IgnoredSeed(cell="z"), "no run of cell"),
    ],
)
def test_effects_that_do_not_fit_are_refused(layout, rng, effect, message):
    with pytest.raises(BadInput, match=message):
        simulate(layout, rng, effects=[effect])


def test_cache_across_cells_unknown_law_and_repeated_labels_are_refused(layout, rng):
    i, j = (int(np.argmax(layout.cells == cell)) for cell in "ab")
    with pytest.raises(BadInput, match="different cells"):
        simulate(layout, rng, effects=[CachedResults(pairs=((i, j),))])
    with pytest.raises(BadInput, match="no law"):
        simulate(layout, rng, law="cauchy")
    with pytest.raises(BadInput, match="distinct labels"):
        blocked_layout(rng, cells=("a", "a"), hosts=HOSTS, replicates=1)
    with pytest.raises(BadInput, match="replicates"):
        sweep_layout(cells=CELLS, hosts=HOSTS, replicates=0)
