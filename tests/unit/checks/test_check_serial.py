"""Checks of neighbours: planted correlation is found, near misses are not, and too little is said so."""

import numpy as np
import pytest
from series_made import series

from auditd.checks.full_audit import audit_series
from auditd.checks.serial_ljung_box import SerialLjungBox
from auditd.checks.serial_von_neumann import SerialVonNeumann, lag_one
from auditd.checks.view import whole
from auditd.stats import ljung_box, von_neumann_rank


def autoregressive(n, phi, seed):
    rng = np.random.default_rng(seed)
    x = np.empty(n)
    x[0] = rng.normal()
    for t in range(1, n):
        x[t] = phi * x[t - 1] + np.sqrt(1 - phi**2) * rng.normal()
    return x


def finding(answers, check, along):
    (one,) = [one for one in answers if (one.check, one.along) == (check, along)]
    return one


def test_one_cell_gives_the_ratio_of_the_library():
    """With one cell the statistic is Bartels' own and p is the same up to the correction's 1/n."""
    x = np.random.default_rng(1).normal(size=500)
    found = SerialVonNeumann().ask(whole(series(x)))
    known = von_neumann_rank(x, alternative="positive")
    assert found.statistic == pytest.approx(known.statistic, abs=1e-9)
    assert found.pvalue == pytest.approx(known.pvalue, abs=1e-9)


def test_one_cell_gives_nearly_the_portmanteau_of_the_library():
    """With one cell the statistic differs from Ljung and Box's by what centring takes, of order 1/n."""
    x = np.random.default_rng(2).normal(size=2_000)
    view = whole(series(x))
    found = SerialLjungBox().ask(view)
    known = ljung_box(view.scores, 10)
    assert found.statistic == pytest.approx(known.statistic, abs=0.5)


@pytest.mark.parametrize("check", [SerialVonNeumann(), SerialLjungBox()])
def test_planted_autocorrelation_is_found_with_its_size(check):
    """An AR(1) of 0.4 over 400 runs of four cells is found, and the effect's interval holds 0.4."""
    x = autoregressive(400, 0.4, 3)
    cells = np.random.default_rng(3).integers(0, 4, 400)
    found = check.ask(whole(series(x + 5.0 * cells, cells=cells)))
    assert found.pvalue < 1e-6
    assert found.effect.low < 0.45
    assert found.effect.high > 0.3


@pytest.mark.parametrize("check", [SerialVonNeumann(), SerialLjungBox()])
def test_levels_of_cells_run_one_after_the_other_are_no_dependence(check):
    """Cells in sorted order with levels far apart: the levels are taken off, and nothing is found."""
    rng = np.random.default_rng(4)
    cells = np.repeat(np.arange(8), 50)
    found = check.ask(whole(series(rng.normal(size=400) + 10 * cells, cells=cells)))
    assert found.pvalue > 0.01


def test_dependence_within_a_host_is_found_though_hosts_alternate():
    """Four hosts in turn, each with its own memory: the whole order shows little, within hosts all."""
    x = np.column_stack([autoregressive(100, 0.7, 10 + k) for k in range(4)]).ravel()
    answers, _ = audit_series(series(x, nuisance={"host": np.arange(400) % 4}))
    within = finding(answers, "von_neumann_rank", "host")
    assert within.verdict == "dependence"
    assert within.effect.value > 0.5
    assert finding(answers, "von_neumann_rank", "order").verdict == "no evidence"


def test_a_host_effect_is_not_called_serial_within_hosts():
    """Levels far apart, in stretches: dependence between hosts, none within."""
    rng = np.random.default_rng(5)
    host = np.repeat(np.arange(4), 60)
    answers, _ = audit_series(series(rng.normal(size=240) + 3 * host, nuisance={"host": host}))
    assert finding(answers, "von_neumann_rank", "host").verdict == "no evidence"
    assert finding(answers, "one_way", "host").verdict == "dependence"


@pytest.mark.parametrize("n", [1, 2, 5, 9])
def test_few_runs_are_not_testable_with_the_number_needed(n):
    """Below ten runs the answer names what is needed and what there is; no statistic is given."""
    answers, _ = audit_series(series(np.arange(n, dtype=float)))
    found = finding(answers, "von_neumann_rank", "order")
    assert found.verdict == "not testable"
    assert f"needs 10 runs, got {n}" in found.reason
    assert found.statistic is None
    assert found.pvalue is None


def test_constant_results_are_not_testable():
    """Constant results say nothing, and are not passed as clean."""
    answers, _ = audit_series(series(np.full(100, 3.25), nuisance={"host": np.arange(100) % 3}))
    assert {one.verdict for one in answers} == {"not testable"}
    assert all("constant" in one.reason for one in answers)


def test_the_lag_one_interval_has_its_coverage():
    """The 95 % interval of the lag-1 correlation holds 0 in 95 % of exchangeable series (binomial 0.1 %)."""
    rng = np.random.default_rng(6)
    held = 0
    for _ in range(400):
        effect = lag_one(whole(series(rng.normal(size=150))))
        held += effect.low <= 0 <= effect.high
    assert 365 <= held <= 393


@pytest.mark.parametrize(("n_cells", "n_in_cell"), [(500, 40), (100, 5)])
def test_many_cells_in_sorted_order_are_no_dependence(n_cells, n_in_cell):
    """Taking off a cell's level ties its scores together: taken off by formula, or by permutation if small.

    Without it the portmanteau statistic of these exchangeable runs is far beyond any level.
    """
    cells = np.repeat(np.arange(n_cells), n_in_cell)
    rng = np.random.default_rng(7)
    for check in (SerialVonNeumann(), SerialLjungBox()):
        found = [check.ask(whole(series(rng.normal(size=len(cells)), cells=cells))).pvalue for _ in range(8)]
        assert 0.001 < min(found) < 0.8
        assert max(found) > 0.2
