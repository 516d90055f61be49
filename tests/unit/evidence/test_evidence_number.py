"""The effective number of runs: its parts, their order, and what it refuses."""

import numpy as np
import pytest
from scipy.signal import lfilter
from statsmodels.regression.linear_model import OLS

from auditd.errors import BadInput, NotTestable
from auditd.evidence import effective_number, evidence_loss
from auditd.evidence.chains import within
from auditd.evidence.inputs import as_codes
from auditd.evidence.sequence import initial_sequence
from auditd.evidence.suspects import suspect


@pytest.fixture
def rng():
    return np.random.default_rng(21)


def product(found):
    return float(np.prod(list(found.parts.values())))


def test_parts_come_in_order_and_multiply_to_the_whole(rng):
    """Duplicates, lineage, batch, serial; their product is n_effective / n."""
    n = 600
    host = np.arange(n) % 6
    values = lfilter([1.0], [1.0, -0.5], rng.standard_normal(n)) + rng.standard_normal(6)[host]
    parents = np.where(np.arange(n) % 10 == 0, -1, np.arange(n) - 1)
    found = effective_number(
        values,
        cells=rng.integers(0, 2, n),
        nuisance={"host": host},
        duplicates=np.arange(n) % 50 == 49,
        parents=parents,
    )
    assert list(found.parts) == ["duplicates", "lineage", "batch", "serial"]
    assert product(found) == pytest.approx(found.n_effective / n, rel=1e-9)
    assert found.loss == pytest.approx(1 - found.n_effective / n)
    assert found.loss_low <= found.loss <= found.loss_high


def test_independent_runs_mostly_lose_nothing_at_all(rng):
    """A part whose interval includes no loss has the factor 1, in about 19 of 20 campaigns a cause."""
    found = [
        effective_number(
            rng.standard_normal(500), cells=rng.integers(0, 4, 500), nuisance={"host": np.arange(500) % 5}
        )
        for _ in range(60)
    ]
    whole = [one for one in found if abs(one.n_effective - 500) < 1e-6]
    assert len(whole) >= 48  # 0.999 quantile of Binomial(60, 0.075) from below
    assert all(one.loss_high > 0 for one in whole)


@pytest.mark.parametrize(
    "duplicates",
    [
        np.arange(200) >= 100,
        np.concatenate((np.full(100, -1), np.arange(100))),
        np.tile(np.arange(100), 2),
        [f"run {i}" for i in range(100)] * 2,
    ],
    ids=["booleans", "indices", "groups", "labels"],
)
def test_copies_count_as_distinct_runs(rng, duplicates):
    """A hundred runs given twice are a hundred, however the copies are told."""
    values = np.tile(rng.standard_normal(100), 2)
    found = effective_number(values, cells=[0] * 200, duplicates=duplicates)
    assert found.parts["duplicates"] == pytest.approx(0.5)
    assert found.n_effective == pytest.approx(100, rel=1e-6)


def chains(rng, n_chains, length, rho):
    values = []
    for _ in range(n_chains):
        one = [rng.standard_normal()]
        for _ in range(length - 1):
            one.append(rho * one[-1] + np.sqrt(1 - rho**2) * rng.standard_normal())
        values += one
    place = np.arange(n_chains * length)
    return np.array(values), np.where(place % length == 0, -1, place - 1)


def test_restarts_that_inherit_nothing_count_as_runs(rng):
    """Lineage without correlation: every run counts, in about 19 of 20 campaigns."""
    found = []
    for _ in range(30):
        values, parents = chains(rng, 40, 10, 0.0)
        found.append(effective_number(values, cells=[0] * 400, parents=parents).parts["lineage"])
    assert np.median(found) == pytest.approx(1)
    assert sum(part == 1 for part in found) >= 23
    assert min(found) > 0.6


def test_restarts_that_inherit_everything_count_as_chains(rng):
    """Lineage of correlation near 1: every chain counts once."""
    values, parents = chains(rng, 40, 10, 0.9999)
    found = effective_number(values, cells=[0] * 400, parents=parents)
    assert 40 <= found.n_effective < 41


def test_restarts_between_the_ends_count_between(rng):
    """Correlation 0.6: chains + continuations × (1 − ρ)/(1 + ρ)."""
    values, parents = chains(rng, 200, 10, 0.6)
    found = effective_number(values, cells=[0] * 2000, parents=parents)
    assert found.n_effective == pytest.approx(200 + 1800 * 0.25, rel=0.15)


def test_equal_hosts_of_a_strong_effect_count_as_hosts(rng):
    """Six hosts far apart are worth about six runs."""
    host = np.arange(600) % 6
    found = effective_number(
        0.01 * rng.standard_normal(600) + rng.standard_normal(6)[host],
        cells=[0] * 600,
        nuisance={"host": host},
    )
    assert found.n_effective == pytest.approx(6, rel=0.02)
    assert found.parts["serial"] == pytest.approx(1, rel=0.02)


def test_one_host_a_cell_is_said_to_be_unknown(rng):
    """A host effect that no cell can show is remarked, not passed as clean."""
    cells = np.arange(400) % 4
    found = effective_number(rng.standard_normal(400), cells=cells, nuisance={"host": cells})
    assert any("cannot be told" in remark for remark in found.remarks)


def test_one_run_a_host_is_said_to_be_unknown(rng):
    """The same with one run a host."""
    found = effective_number(rng.standard_normal(400), cells=[0] * 400, nuisance={"host": np.arange(400)})
    assert any("one run a level" in remark for remark in found.remarks)


def test_a_step_on_one_host_is_not_called_autocorrelation(rng):
    """One of three hosts changes by ten standard deviations: a step is counted, and the rest is not
    autocorrelated."""
    host = np.arange(900) % 3
    values = rng.standard_normal(900) + 10.0 * ((host == 1) & (np.arange(900) > 300))
    found = effective_number(values, cells=[0] * 900, nuisance={"host": host})
    assert found.detail["steps"] == 1
    assert abs(found.detail["phi"]) < 0.15
    assert found.n_effective < 10


def test_autocorrelation_alone_is_not_called_a_step(rng):
    """An AR(1) of 0.8 wanders, but has no steps."""
    found = effective_number(lfilter([1.0], [1.0, -0.8], rng.standard_normal(1000)), cells=[0] * 1000)
    assert found.detail["steps"] == 0
    assert found.n_effective == pytest.approx(1000 / 9, rel=0.4)


def test_autocorrelation_costs_less_where_cells_take_turns_at_random(rng):
    """The cells' means share runs of a wander: two cells in random order lose less than one cell, more than
    nothing."""
    values = lfilter([1.0], [1.0, -0.6], rng.standard_normal(4000))
    one = effective_number(values, cells=[0] * 4000).n_effective
    two = effective_number(values, cells=rng.integers(0, 2, 4000)).n_effective
    assert 1.3 * one < two < 3000


def test_serial_dependence_within_hosts_is_not_a_host_effect(rng):
    """An AR(1) of 0.7 within each of four hosts inflates the hosts' mean square without any host effect."""
    n_found = 0
    for _ in range(20):
        series = lfilter([1.0], [1.0, -0.7], rng.standard_normal((4, 250)))
        host = np.tile(np.arange(4), 250)
        found = effective_number(series.T.ravel(), cells=[0] * 1000, nuisance={"host": host})
        n_found += found.parts["batch"] < 0.999
        assert found.n_effective < 400
    assert n_found <= 4


def test_negative_dependence_may_give_more_than_n(rng):
    """Alternating errors make the mean better than independent ones."""
    found = effective_number(lfilter([1.0], [1.0, 0.5], rng.standard_normal(2000)), cells=[0] * 2000)
    assert found.n_effective > 4000


@pytest.mark.parametrize(
    ("parents", "match"),
    [
        ([1, 2, 0, -1] + [-1] * 6, "cycle"),
        ([0] + [-1] * 9, "own parent"),
        ([10] + [-1] * 9, "indices"),
        ([0.5] * 10, "integers"),
        ([-1] * 9, "shape"),
    ],
)
def test_malformed_lineage_is_bad_input(rng, parents, match):
    """Cycles, self-parents, indices outside and wrong types are refused."""
    with pytest.raises(BadInput, match=match):
        effective_number(rng.standard_normal(10), cells=[0] * 10, parents=parents)


@pytest.mark.parametrize("values", [[], [1.0], [1.0, 2.0, 3.0], [4.0] * 50])
def test_too_little_has_no_number(values):
    """Fewer than three runs beyond one a cell, or constant values, are not testable."""
    with pytest.raises(NotTestable, match="needs"):
        effective_number(values, cells=[0] * len(values))


def test_loss_of_a_comparison_that_cannot_be_estimated_is_whole(rng):
    """Aliased hosts: everything is lost, with the reason."""
    cells = np.arange(100) % 2
    found = evidence_loss(rng.standard_normal(100), cells=cells, a=0, b=1, nuisance={"host": cells})
    assert not found.estimable
    assert found.low == 1
    assert "host" in found.reason


def test_loss_of_independent_runs_is_small_and_its_lower_end_is_nothing(rng):
    """Neither a comparison nor a cell's mean loses anything surely."""
    values, cells = rng.standard_normal(400), np.arange(400) % 2
    assert evidence_loss(values, cells=cells).low < 0.05
    assert evidence_loss(values, cells=cells, a=0, b=1).low < 0.05


def test_loss_of_a_comparison_in_blocks_of_order_is_found(rng):
    """A before B under an AR(1) of 0.8 surely loses more than a tenth."""
    values = lfilter([1.0], [1.0, -0.8], rng.standard_normal(600))
    found = evidence_loss(values, cells=np.repeat([0, 1], 300), a=0, b=1)
    assert found.low > 0.1


def test_copies_are_lost_to_a_comparison(rng):
    """Half the runs being copies, at least half of the evidence is lost."""
    values = np.tile(rng.standard_normal(200), 2)
    cells = np.tile(np.arange(200) % 2, 2)
    found = evidence_loss(values, cells=cells, a=0, b=1, duplicates=np.arange(400) >= 200)
    assert found.loss == pytest.approx(0.5, abs=0.1)


def test_one_side_without_the_other_is_refused(rng):
    """A comparison needs both sides."""
    with pytest.raises(BadInput, match="both"):
        evidence_loss(rng.standard_normal(10), cells=[0] * 10, a=0)


def test_a_memory_that_no_autoregression_fits_is_read_off(rng):
    """Means of forty neighbours: the variance of the mean is forty times that of independent runs."""
    values = np.convolve(rng.standard_normal(20_039), np.ones(40), mode="valid")
    found = effective_number(values, cells=[0] * 20_000)
    assert found.n_effective == pytest.approx(500, rel=0.5)
    assert found.detail["order"] > 1


def test_the_initial_sequence_of_an_autoregression(rng):
    """Geyer (1992): positive, falling in pairs, and φ^k at small lags; over two chains as over one."""
    values = lfilter([1.0], [1.0, -0.7], rng.standard_normal((2, 20_000)))
    codes = as_codes(np.repeat([0, 1], 20_000), 40_000, "chain")
    found = initial_sequence(values.ravel() - values.mean(), within(codes, "chain"), 200)
    assert found.autocorrelations(4) == pytest.approx(0.7 ** np.arange(1, 5), abs=0.04)
    pairs = np.append(1.0, found.values)[: 2 * (found.order // 2) + 2].reshape(-1, 2).sum(axis=1)
    assert (np.diff(pairs) <= 1e-12).all()
    assert (found.autocorrelations(400)[250:] == 0).all()


def test_a_few_wide_cells_do_not_decide_for_all(rng):
    """Two large cells whose hosts differ (ICC 0.8) beside twenty small ones of a hundred times the spread:
    the large cells' loss is found, as if they were alone."""
    cells = np.concatenate((np.repeat([0, 1], 180), 2 + np.repeat(np.arange(20), 6)))
    host = np.concatenate((np.arange(360) // 3, 120 + np.arange(120) // 3))
    values = rng.standard_normal(480) + 2 * rng.standard_normal(160)[host]
    values[cells > 1] = 100 * rng.standard_normal(120)
    whole = effective_number(values, cells=cells, nuisance={"host": host}, ordered=False)
    alone = effective_number(values[:360], cells=cells[:360], nuisance={"host": host[:360]}, ordered=False)
    assert alone.n_effective == pytest.approx(360 / (1 + 2 * 0.8), rel=0.15)
    assert whole.loss == pytest.approx(alone.loss, abs=0.2)


def test_means_of_two_crossed_nuisances_add_up(rng):
    """One run a host and position: the means taken off are hosts + positions, not their product, so that the
    hosts' effect (ICC 0.9) does not drown in an error without degrees of freedom."""
    host, position = np.arange(180) // 3, np.arange(180) % 3
    values = rng.standard_normal(180) + 3 * rng.standard_normal(60)[host] + 0.5 * position
    found = effective_number(
        values, cells=[0] * 180, nuisance={"host": host, "position": position}, ordered=False
    )
    assert found.detail["icc host"] == pytest.approx(0.9, abs=0.05)
    assert found.n_effective < 90


def test_a_nuisance_is_asked_with_the_error_that_another_left(rng):
    """One run a host and position: F and degrees of freedom of the positions are those of a two-way analysis
    of variance by statsmodels' ordinary least squares."""
    host, position = np.arange(90) // 3, np.arange(90) % 3
    values = rng.standard_normal(90) + 3 * rng.standard_normal(30)[host] + 0.1 * position
    cell = np.zeros(90, dtype=np.int64)
    nuisances = {"host": as_codes(host, 90, "host"), "position": as_codes(position, 90, "position")}
    positions = next(
        e for e in suspect(values - values.mean(), cell, 1, nuisances).found if e.name == "position"
    )
    of_host = (host[:, None] == np.arange(30)).astype(float)
    of_position = (position[:, None] == np.arange(1, 3)).astype(float)
    whole = OLS(values, np.hstack((of_host, of_position))).fit()
    f, pvalue, df = whole.compare_f_test(OLS(values, of_host).fit())
    assert (positions.df, positions.df_within) == (df, whole.df_resid)
    assert positions.between / positions.within == pytest.approx(f)
    assert positions.pvalue(1.0) == pytest.approx(pvalue)
