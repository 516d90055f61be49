"""What every check of the full audit keeps, each new one from the day that it stands in the registry."""

import numpy as np
import pytest
from series_made import BEGAN, series

from auditd.checks.check import Check
from auditd.checks.full_audit import CHECKS, adjusted, audit_series
from auditd.checks.orders import between, views_within
from auditd.checks.view import whole
from auditd.errors import BadInput, NotTestable

N = 240


def made(values=None, n=N, seed=0, **changed):
    """A series on which every check can be asked: cells, hosts, times over 20 days, parents."""
    rng = np.random.default_rng(seed)
    parents = np.where(np.arange(n) % 3 == 2, np.arange(n) - 2, -1)
    known = {
        "cells": rng.integers(0, 3, n),
        "nuisance": {"host": rng.integers(0, 4, n)},
        "started": BEGAN + np.sort(rng.uniform(0, 20 * 86_400, n)),
        "parents": parents,
    } | changed
    return series(rng.normal(size=n) if values is None else values, **known)


def views_of(check, one):
    """Return the views that a check may be asked of: whole, within and between levels."""
    first = whole(one)
    if check.name == "one_way":
        return between(first)
    if check.family == "shape" or check.name == "parent_correlation":
        return [first]
    return [first, *views_within(first)[0]]


def answers(check, one):
    found = []
    for view in views_of(check, one):
        try:
            found.append(check.ask(view))
        except (NotTestable, BadInput):
            found.append(None)
    return found


each_check = pytest.mark.parametrize("check", CHECKS, ids=lambda check: check.name)


@each_check
def test_a_check_says_what_it_tests(check: Check):
    """Null, assumptions, source, runs needed and what is tiny stand on the check."""
    assert check.null
    assert check.assumes
    assert any(part.isdigit() and len(part) == 4 for part in check.source.replace("(", " ").replace(
        ")", " ").replace(",", " ").split())  # fmt: skip
    assert check.family in {"dependence", "shape"}
    assert check.unit in {"share", "response"}
    assert check.n_min >= 2
    assert "Null hypothesis" in type(check).__doc__
    assert "Assumptions" in type(check).__doc__


@each_check
def test_an_answer_is_whole(check: Check):
    """Statistic, p in [0, 1], effect inside its interval, n: plain numbers, ready for JSON."""
    for found in answers(check, made()):
        assert found is not None
        assert type(found.statistic) is float
        assert type(found.pvalue) is float
        assert 0 <= found.pvalue <= 1
        assert type(found.n) is int
        assert 0 < found.n <= N
        assert type(found.effect.value) is float
        assert found.effect.low <= found.effect.value <= found.effect.high


@each_check
def test_nothing_that_is_given_is_changed(check: Check):
    """Arrays of the series and the view are left as they were."""
    one = made()
    kept = [one.values.copy(), one.cells.codes.copy(), one.started.copy(), one.parents.copy()]
    for view in views_of(check, one):
        before = (view.scores.copy(), view.values.copy(), view.rows.copy())
        check.ask(view)
        for old, new in zip(before, (view.scores, view.values, view.rows), strict=True):
            np.testing.assert_array_equal(old, new)
    for old, new in zip(kept, (one.values, one.cells.codes, one.started, one.parents), strict=True):
        np.testing.assert_array_equal(old, new)


@each_check
def test_the_same_series_gives_the_same_answer(check: Check):
    """Also where p comes from permutations."""
    small = {"cells": np.arange(N) // 5}
    assert answers(check, made()) == answers(check, made())
    assert answers(check, made(**small)) == answers(check, made(**small))


@each_check
def test_units_and_origin_do_not_matter(check: Check):
    """Statistic and p of 1,000·x − 5·10⁵ are those of x; effects in response units scale along."""
    x = np.random.default_rng(3).lognormal(size=N)
    for plain, other in zip(answers(check, made(x)), answers(check, made(1_000 * x - 5e5)), strict=True):
        assert other.statistic == pytest.approx(plain.statistic, rel=1e-6, abs=1e-8)
        assert other.pvalue == pytest.approx(plain.pvalue, rel=1e-6, abs=1e-12)
        factor = 1_000 if check.unit == "response" else 1
        assert other.effect.value == pytest.approx(factor * plain.effect.value, rel=1e-6, abs=1e-6)


@each_check
def test_names_of_cells_do_not_matter(check: Check):
    """With cells numbered otherwise the answer is the same."""
    rng = np.random.default_rng(4)
    x, cells = rng.normal(size=N), rng.integers(0, 3, N)
    for plain, other in zip(
        answers(check, made(x, cells=cells)), answers(check, made(x, cells=2 - cells)), strict=True
    ):
        assert other.pvalue == pytest.approx(plain.pvalue, rel=1e-9, abs=1e-12)
        assert other.statistic == pytest.approx(plain.statistic, rel=1e-9)


@each_check
def test_levels_of_cells_do_not_matter(check: Check):
    """What cells differ by on purpose is taken off."""
    rng = np.random.default_rng(5)
    x, cells = rng.normal(size=N), rng.integers(0, 3, N)
    shifted = x + np.array([0.0, 50.0, -7.0])[cells]
    for plain, other in zip(
        answers(check, made(x, cells=cells)), answers(check, made(shifted, cells=cells)), strict=True
    ):
        assert other.pvalue == pytest.approx(plain.pvalue, rel=1e-6, abs=1e-9)


@each_check
@pytest.mark.parametrize("n", [1, 2, 3, 4, 7, 12, 25])
def test_few_runs_are_answered_or_refused(check: Check, n):
    """Any number of runs gives a number or a reason: never NaN, never a numpy warning (an error here)."""
    answers_found, _ = audit_series(made(n=n))
    for found in (one for one in answers_found if one.check == check.name):
        assert (found.pvalue is None) == (found.verdict == "not testable")
        assert found.pvalue is None or np.isfinite([found.pvalue, found.statistic]).all()
        assert found.pvalue is not None or found.reason


HARD = {
    "constant": np.full(N, 2.5),
    "constant in two of three cells": np.where(np.arange(N) % 3 == 0, np.arange(N), 1.0),
    "two values": (np.arange(N) % 7 == 0).astype(float),
    "one far away": np.where(np.arange(N) == 17, 1e9, np.random.default_rng(6).normal(size=N)),
    "tiny": 1e-150 * np.random.default_rng(7).normal(size=N),
    "huge": 1e120 * np.random.default_rng(8).normal(size=N),
    "far from zero": 1e15 + np.round(np.random.default_rng(9).normal(size=N), 0),
    "ascending": np.arange(N, dtype=float),
}


@pytest.mark.parametrize("name", HARD)
@pytest.mark.parametrize("cells", [np.arange(N) % 3, np.arange(N) // 4, np.arange(N)], ids=["3", "60", "N"])
def test_hard_values_are_answered_or_refused(name, cells):
    """Constants, ties, outliers, tiny and huge values: a finite answer or a reason, without a warning."""
    answers_found, not_asked = audit_series(made(HARD[name], cells=cells))
    assert answers_found
    for one in answers_found:
        numbers = [one.statistic, one.pvalue, one.adjusted_pvalue]
        if one.effect is not None:
            numbers += [one.effect.value, one.effect.low, one.effect.high]
        assert all(number is None or np.isfinite(number) for number in numbers), one
        assert one.pvalue is not None or (one.verdict == "not testable" and one.reason)
    assert all(sentence.startswith("energy, ") for sentence in not_asked)


def test_an_empty_series_is_said_to_be_empty():
    """No completed runs: no finding, and a sentence."""
    assert audit_series(series([])) == ([], ["energy: no completed runs"])


@each_check
def test_adjusting_never_lowers_a_p_value(check: Check):
    """Holm's p-values are at least the raw ones and at most 1, and verdicts follow them."""
    raw = [one for one in answers(check, made()) if one is not None]
    for one in adjusted(raw):
        assert one.pvalue <= one.adjusted_pvalue <= 1
        assert (one.adjusted_pvalue <= 0.05) == (one.verdict in {"dependence", "departure"})
