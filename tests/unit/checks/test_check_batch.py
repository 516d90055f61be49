"""The check between levels: planted effects with their size, aliased and single-run levels in the open."""

import numpy as np
import pytest
from series_made import series

from auditd.checks.batch_one_way import BatchOneWay
from auditd.checks.full_audit import audit_series
from auditd.checks.level_layout import layout
from auditd.checks.orders import between
from auditd.checks.view import whole
from auditd.stats import one_way


def asked(values, cells, host):
    (view,) = between(whole(series(values, cells=cells, nuisance={"host": host})))
    return BatchOneWay().ask(view)


def finding(answers):
    (one,) = [one for one in answers if one.check == "one_way"]
    return one


def test_one_cell_gives_the_f_of_the_library():
    """With one cell the F ratio and p are those of the one-way layout of the scores."""
    rng = np.random.default_rng(1)
    host = rng.integers(0, 5, 200)
    x = rng.normal(size=200) + 0.3 * host
    view = whole(series(x, nuisance={"host": host}))
    found, known = asked(x, np.zeros(200, int), host), one_way(view.scores, host)
    assert found.statistic == pytest.approx(known.statistic)
    assert found.pvalue == pytest.approx(known.pvalue)
    assert found.effect.value == pytest.approx(known.icc, abs=0.01)
    assert found.effect.low == pytest.approx(known.icc_low, abs=0.03)


def test_the_planted_intraclass_correlation_is_in_its_interval():
    """Twelve hosts with ICC 0.3 crossed with four cells: found, and the interval holds 0.3."""
    rng = np.random.default_rng(2)
    host, cells = rng.integers(0, 12, 960), rng.integers(0, 4, 960)
    x = rng.normal(0, np.sqrt(0.3), 12)[host] + rng.normal(0, np.sqrt(0.7), 960) + 2 * cells
    found = asked(x, cells, host)
    assert found.pvalue < 1e-9
    assert found.effect.low < 0.3 < found.effect.high


def test_machines_nested_in_cells_are_judged_within_cells():
    """Three runs on each of 40 machines, 10 machines a cell, ICC 0.7: found with its size."""
    rng = np.random.default_rng(3)
    machine = np.repeat(np.arange(40), 3)
    cells = machine // 10
    x = rng.normal(0, np.sqrt(0.7), 40)[machine] + rng.normal(0, np.sqrt(0.3), 120) + 8 * cells
    found = asked(x, cells, machine)
    assert found.pvalue < 1e-6
    assert found.effect.low < 0.7 < found.effect.high


def test_one_run_a_level_is_not_testable():
    """Each host with one run: nothing can be told, and it says so."""
    rng = np.random.default_rng(4)
    answers, not_checked = audit_series(series(rng.normal(size=60), nuisance={"host": np.arange(60)}))
    assert finding(answers).verdict == "not testable"
    assert "one run a level" in finding(answers).reason
    assert any("one run a level" in sentence for sentence in not_checked)


def test_cells_on_hosts_of_their_own_are_not_testable():
    """Every cell on its own host: the two cannot be told apart."""
    cells = np.arange(80) % 4
    answers, _ = audit_series(
        series(np.random.default_rng(5).normal(size=80), cells=cells, nuisance={"host": cells})
    )
    assert finding(answers).verdict == "not testable"
    assert "told apart" in finding(answers).reason


def test_one_level_is_not_testable():
    """A nuisance with one level has nothing to compare."""
    answers, _ = audit_series(
        series(np.random.default_rng(6).normal(size=80), nuisance={"host": np.zeros(80, int)})
    )
    assert finding(answers).verdict == "not testable"


def test_levels_that_decide_the_result_are_found_and_not_divided_by_zero():
    """Two levels, one value each: certain, with finite numbers."""
    host = np.arange(60) % 2
    found = asked(host.astype(float), np.zeros(60, int), host)
    assert found.pvalue < 1e-9
    assert np.isfinite(found.statistic)
    assert found.effect.value == pytest.approx(1.0, abs=1e-3)


def test_the_layout_has_the_classical_degrees_of_freedom():
    """Crossed and balanced: levels − 1 and n − cells − levels + 1; nested: levels − cells."""
    cells, host = np.repeat(np.arange(3), 40), np.tile(np.arange(4), 30)
    crossed = layout(cells, host)
    assert (crossed.df, crossed.df_within) == (pytest.approx(3), pytest.approx(114))
    assert crossed.weight == pytest.approx(120 - 30)
    nested = layout(cells, cells * 4 + host)
    assert nested.df == pytest.approx(9)
    assert nested.spread == pytest.approx(nested.weight)


def test_the_expectations_of_the_layout_are_those_of_simulation():
    """Uneven, partly aliased: the mean of Σ S²/n over random effects is the weight, within 3 %."""
    rng = np.random.default_rng(7)
    cells = np.repeat(np.arange(3), [50, 30, 20])
    host = np.where(rng.random(100) < 0.6, cells, rng.integers(0, 4, 100))
    lie = layout(cells, host)
    sums = []
    for _ in range(4_000):
        y = rng.normal(size=4)[host]
        r = y - (np.bincount(cells, y) / np.bincount(cells))[cells]
        sums.append(float((np.bincount(host, r, minlength=4) ** 2 / np.bincount(host, minlength=4)).sum()))
    assert np.mean(sums) == pytest.approx(lie.weight, rel=0.05)
