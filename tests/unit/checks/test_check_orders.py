"""Which orders are asked, and which are said not to be."""

import numpy as np
import pytest
from series_made import BEGAN, series, table

from auditd.checks.design_questions import design_answers, tiny_association
from auditd.checks.full_audit import adjusted, audit_series, holm
from auditd.checks.orders import views, views_within
from auditd.checks.view import normal_scores, residuals, whole


def test_start_finish_and_seed_are_orders_of_their_own():
    """Different starts, finishes and seeds give a view each."""
    rng = np.random.default_rng(1)
    started = BEGAN + rng.permutation(100) * 60.0
    finished = started + rng.uniform(10, 9_000, 100)
    seeds = [str(k) for k in rng.permutation(100)]
    found, not_asked = views(series(rng.normal(size=100), started=started, finished=finished, seeds=seeds))
    assert [view.along for view in found] == ["order", "start", "finish", "seed"]
    assert not_asked == []
    assert np.all(np.diff(found[1].times) > 0)


def test_the_same_order_is_asked_once_and_said():
    """Starts in the audit's own order make no second view."""
    found, not_asked = views(series(np.random.default_rng(2).normal(size=50), started=BEGAN + np.arange(50)))
    assert [view.along for view in found] == ["order"]
    assert any("by start: the same order" in sentence for sentence in not_asked)
    assert any("by seed: not stated" in sentence for sentence in not_asked)


def test_finishing_order_that_depends_on_the_outcome_is_not_asked():
    """A response that follows the duration is not asked in finishing order: the reason is told."""
    rng = np.random.default_rng(3)
    duration = rng.exponential(1000, 200)
    started = BEGAN + np.arange(200) * 60.0
    found, not_asked = views(series(duration + 0.0, started=started, finished=started + duration))
    assert "finish" not in [view.along for view in found]
    assert any("depends on the outcome" in sentence for sentence in not_asked)


@pytest.mark.parametrize("seeds", [["a", "b"] * 20, ["9" * 5000, "1"] * 20])
def test_seeds_that_cannot_be_sorted_are_told(seeds):
    """Texts and endless numbers are no order."""
    _, not_asked = views(series(np.random.default_rng(4).normal(size=40), seeds=seeds))
    assert any("whole numbers" in sentence for sentence in not_asked)


def test_runs_of_one_seed_enter_the_order_by_seed_once():
    """Common random numbers: each seed once, so that what they share is no dependence in that order."""
    rng = np.random.default_rng(5)
    seeds = [str(k % 50) for k in range(100)]
    found, _ = views(series(rng.normal(size=100), seeds=seeds))
    assert next(view for view in found if view.along == "seed").n == 50


def test_levels_with_too_few_runs_are_left_out_and_told():
    """Within a nuisance only levels with eight runs are asked."""
    host = np.concatenate([np.zeros(30, int), np.ones(30, int), np.full(3, 2)])
    found, not_asked = views_within(
        whole(series(np.random.default_rng(6).normal(size=63), nuisance={"host": host}))
    )
    assert found[0].n == 60
    assert any("within host: 1 levels with fewer runs" in sentence for sentence in not_asked)


def test_without_an_order_all_that_rests_on_it_is_withheld():
    """Whole tables without time: order checks are not testable, comparisons between levels are."""
    rng = np.random.default_rng(7)
    answers, _ = audit_series(
        series(rng.normal(size=200), nuisance={"host": np.arange(200) % 4}, ordered=False)
    )
    by_check = {}
    for one in answers:
        by_check.setdefault(one.check, set()).add(one.verdict)
    for check in ("von_neumann_rank", "ljung_box", "mann_kendall", "pettitt", "selected_shift"):
        assert by_check[check] == {"not testable"}
    assert by_check["one_way"] == {"no evidence"}


def test_holm_is_the_published_example():
    """Holm's step-down at p = .01, .04, .03, .005 gives .03, .06, .06, .02 (R's p.adjust, documented)."""
    assert holm([0.01, 0.04, 0.03, 0.005]) == pytest.approx([0.03, 0.06, 0.06, 0.02])
    assert holm([]) == []


def test_holm_is_kept_apart_by_family():
    """Twenty departures of shape do not loosen a question about dependence, nor tighten it."""
    answers, _ = audit_series(series(np.random.default_rng(8).lognormal(size=200)))
    alone = [one for one in answers if one.family == "dependence"]
    again = adjusted(alone)
    assert [one.adjusted_pvalue for one in again] == [one.adjusted_pvalue for one in alone]


def test_scores_are_standardised_within_cells():
    """Normal scores have mean 0 and mean square 1 in each cell; ties share one score; constants give 0."""
    rng = np.random.default_rng(9)
    cells = np.repeat([0, 1, 2], [50, 30, 20])
    x = np.round(rng.normal(size=100), 1) + 100 * cells
    x[80:] = 7.0
    scores = normal_scores(x, cells)
    for cell in (0, 1):
        assert scores[cells == cell].mean() == pytest.approx(0, abs=1e-12)
        assert (scores[cells == cell] ** 2).mean() == pytest.approx(1)
    assert not scores[80:].any()
    same = np.flatnonzero(x[:50] == x[0])
    assert len({round(float(scores[k]), 12) for k in same}) == 1


def test_residuals_keep_their_digits_far_from_zero():
    """At a level of 1e12 the residuals are those at 0."""
    x = np.random.default_rng(10).normal(size=100)
    cells = np.arange(100) % 2
    np.testing.assert_allclose(residuals(x + 1e9, cells), residuals(x, cells), atol=1e-6)


def design(cells, host, *, ordered=True):
    made = table({"energy": np.zeros(len(cells))}, cells=cells, nuisance={"host": host}, ordered=ordered)
    return {one.check: one for one in adjusted(list(design_answers(made)))}


def test_levels_in_blocks_of_one_are_found_and_random_ones_not():
    """All of one level before the other is found; a random order is not."""
    rng = np.random.default_rng(11)
    host = rng.integers(0, 3, 200)
    assert design(np.repeat([0, 1], 100), host)["level_order"].verdict == "dependence"
    assert design(rng.integers(0, 2, 200), host)["level_order"].verdict == "no evidence"
    withheld = design(np.repeat([0, 1], 100), host, ordered=False)["level_order"]
    assert withheld.verdict == "not testable"


def test_an_aliased_factor_has_a_v_of_one_and_a_weak_association_is_tiny():
    """A factor on hosts of its own has V = 1; an association of 0.02 at 100,000 runs is certain and tiny."""
    cells = np.arange(300) % 3
    aliased = design(cells, cells)["cramers_v"]
    assert aliased.verdict == "dependence"
    assert aliased.effect.value == pytest.approx(1)
    rng = np.random.default_rng(12)
    cells = rng.integers(0, 2, 100_000)
    host = (rng.random(100_000) < 0.5 + 0.02 * cells).astype(int)
    weak = design(cells, host)["cramers_v"]
    assert weak.verdict == "dependence"
    assert weak.effect.low < 0.02 < weak.effect.high
    assert "tiny" in tiny_association(weak)


def test_one_run_a_host_has_no_association_to_test():
    """Hosts with one run each cannot be told from the runs."""
    found = design(np.arange(40) % 2, np.arange(40))["cramers_v"]
    assert found.verdict == "not testable"
    assert "one run a level" in found.reason
