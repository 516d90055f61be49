"""Comparisons: groups written on a command line, cells matched, and what the numbers are said to mean."""

import math

import numpy as np
import pytest
from run_tables import table_of

from auditd.errors import BadInput, NotTestable
from auditd.pipeline.comparing import (
    Question,
    compare_document,
    contrast_of,
    group_of,
    matched_cells,
    planned_questions,
    questions_of,
    sentence,
    touches,
)
from auditd.plan_reading import parse_plan

PLAN = parse_plan("""
[responses.y]
at = "y"
margin = 0.5
[responses.other]
at = "o"
[factors]
solver = "s"
mesh = "m"
[[comparisons]]
response = "y"
between = [{solver = "a"}, {solver = "b"}]
[[comparisons]]
response = "other"
between = [{solver = "a", mesh = 1.0}, {solver = "b", mesh = 1}]
""")


def crossed(n=80, shift=0.0, seed=1, meshes=(1, 2), drop=()):
    rng = np.random.default_rng(seed)
    cells = [{"solver": s, "mesh": m} for s in ("a", "b") for m in meshes if (s, m) not in drop]
    chosen = [cells[k] for k in rng.permutation(np.arange(n) % len(cells))]
    y = rng.normal(size=n) + [shift * (cell["solver"] == "b") for cell in chosen]
    return table_of({"y": y, "other": rng.normal(size=n)}, cells=chosen)


@pytest.mark.parametrize(
    ("text", "group"),
    [
        ("solver=a", {"solver": "a"}),
        ("solver=a,mesh=1.0", {"solver": "a", "mesh": 1}),
        ("mesh=true", {"mesh": True}),
        ('mesh="1"', {"mesh": "1"}),
        ("solver=x=y", {"solver": "x=y"}),
        ("solver=", {"solver": ""}),
    ],
)
def test_groups_are_read_as_json_levels(text, group):
    """A number is a number, a quoted one a text, and 1.0 is 1 (design, section 4)."""
    found = group_of(PLAN, text)
    assert found == group
    assert [type(level) for level in found.values()] == [type(level) for level in group.values()]


@pytest.mark.parametrize("text", ["solver", "colour=red", "=a", "", "solver=a,", "solver=a;mesh=1"])
def test_what_is_no_group_is_refused_with_the_factors(text):
    """The message names the factors that there are, or the level is unknown later."""
    if text == "solver=a;mesh=1":
        assert group_of(PLAN, text) == {"solver": "a;mesh=1"}
        return
    with pytest.raises(BadInput, match="factors: solver, mesh"):
        group_of(PLAN, text)


def test_planned_questions_are_known_again_when_written_by_hand():
    """A comparison that the plan has is planned whichever way its level is written, others are not."""
    assert [one.planned for one in planned_questions(PLAN)] == [True, True]
    by_hand = questions_of(PLAN, "solver=a,mesh=1", "solver=b,mesh=1.0")
    assert {one.response: one.planned for one in by_hand} == {"y": False, "other": True}
    turned = questions_of(PLAN, "solver=b", "solver=a")
    assert not any(one.planned for one in turned)


def test_cells_are_matched_by_the_factors_that_the_question_leaves_open():
    """A mesh that only one solver ran is left out of both sides."""
    table = crossed(meshes=(1, 2, 3), drop={("b", 3)})
    a, b = matched_cells(table, Question(response="y", a={"solver": "a"}, b={"solver": "b"}, planned=True))
    assert a == ["solver=a mesh=1", "solver=a mesh=2"]
    assert b == ["solver=b mesh=1", "solver=b mesh=2"]


def test_without_a_common_level_both_sides_are_taken_whole():
    """Nothing matches, so nothing is dropped; the contrast says what it rests on."""
    table = crossed(meshes=(1, 2), drop={("a", 1), ("b", 2)})
    a, b = matched_cells(table, Question(response="y", a={"solver": "a"}, b={"solver": "b"}, planned=True))
    assert (a, b) == (["solver=a mesh=2"], ["solver=b mesh=1"])


def test_a_side_without_runs_is_not_testable_and_said_so():
    """A level that never ran gives a document with its reason, every number null."""
    table = crossed()
    question = Question(response="y", a={"solver": "a"}, b={"solver": "zzz"}, planned=False)
    with pytest.raises(NotTestable, match="completed runs of solver=zzz"):
        contrast_of(table, PLAN, question, 0.95)
    (one,) = compare_document(table, PLAN, [question])
    assert (one["estimable"], one["estimate"], one["verdict"]) == (False, None, None)
    assert "solver=zzz" in one["reason"]
    assert one["sentence"].startswith("This comparison cannot be estimated")


def test_planned_comparisons_share_the_confidence():
    """Two planned comparisons hold together at 95 %: Bonferroni (Dunn 1961) gives each 97.5 %."""
    table = crossed()
    found = compare_document(table, PLAN, planned_questions(PLAN))
    assert [one["confidence"] for one in found] == [pytest.approx(0.975)] * 2
    (alone,) = compare_document(table, PLAN, questions_of(PLAN, "solver=a,mesh=1", "solver=a,mesh=2")[:1])
    assert alone["confidence"] == 0.95
    assert alone["high"] - alone["low"] < found[0]["high"] - found[0]["low"] or alone["n"] < found[0]["n"]


def test_a_planted_difference_is_estimated_and_beyond_the_margin():
    """Two standard deviations between the solvers are found, on the right side, with b less a."""
    (one, _) = compare_document(crossed(n=200, shift=2.0), PLAN, planned_questions(PLAN))
    assert one["low"] < 2.0 < one["high"]
    assert one["verdict"] == "beyond the margin"
    assert "beyond the margin of 0.5" in one["sentence"]
    assert one["runs_needed"] is None


def test_repeated_results_count_once():
    """A cell that ignored its seed is one run of four cells' 200: as exact as some twenty independent ones.

    With equal weights the variance is (1/50 + 1/50 + 1/50 + 1)/4 in place of (4/50)/4: 0.075 of the worth.
    """
    table = crossed(n=200)
    y, other = table.responses["y"].copy(), table.responses["other"].copy()
    copied = table.cells.codes == table.cells.levels.index("solver=b mesh=2")
    y[copied], other[copied] = 0.123456789012, 1.987654321098
    repeated = table_of(
        {"y": y, "other": other}, cells=[table.cell_values[code] for code in table.cells.codes]
    )
    question = planned_questions(PLAN)[:1]
    (before,), (after,) = (compare_document(one, PLAN, question) for one in (table, repeated))
    assert after["n"] == before["n"] == 200
    assert after["n_effective"] < 0.2 * before["n_effective"]
    assert after["loss"] > 0.8
    assert after["high"] - after["low"] > 2 * (before["high"] - before["low"])
    assert any("count once" in remark for remark in after["remarks"])


DOCUMENT = {
    "estimable": True, "reason": None, "n": 400, "n_effective": 100.0, "low": -2.0, "high": 2.0,
    "naive_low": -1.0, "naive_high": 1.0, "weak": False, "margin": 0.5, "verdict": "undecided",
    "runs_needed": 1234, "df": 90.0,
}  # fmt: skip


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({}, "400 runs are worth 100 here"),
        ({}, "the margin of 0.5 is undecided; about 1,234 more runs would decide"),
        ({"n_effective": 400.0, "df": 3.5}, "only 3.5 degrees of freedom"),
        ({"low": -0.5, "high": 0.5}, "0.50 times the naive one"),
        ({"low": -1.0, "high": 1.0, "n_effective": 390.0}, "agree"),
        ({"verdict": "within the margin", "low": 0.1, "high": 0.3}, "certainly too small to matter"),
        ({"weak": True}, "is weak"),
        ({"margin": None, "verdict": None, "runs_needed": None}, "2.0 times as wide."),
        ({"estimable": False, "reason": "hosts never met"}, "cannot be estimated: hosts never met."),
    ],
)
def test_the_sentence_says_what_the_numbers_mean(changed, words):
    """Each case of naive against honest has words of its own, and they end in one full stop."""
    text = sentence(DOCUMENT | changed)
    assert words in text
    assert text.endswith(".")
    assert not text.endswith("..")


def test_a_comparison_is_touched_by_its_own_cells_only():
    """A finding about a cell of neither side does not concern a comparison."""
    table = crossed(meshes=(1, 2))
    question = planned_questions(PLAN)[1]
    assert touches(question, ["solver=a mesh=1"], table)
    assert not touches(question, ["solver=a mesh=2"], table)


def test_an_unknown_response_is_refused_by_name():
    """The message lists those that there are."""
    with pytest.raises(BadInput, match="known: y, other"):
        contrast_of(crossed(), PLAN, Question(response="z", a={}, b={}, planned=False), 0.95)


def test_numbers_of_a_document_are_finite_or_null():
    """JSON has no NaN: even with eight runs every number is finite or null."""
    (one, _) = compare_document(crossed(n=8), PLAN, planned_questions(PLAN))
    assert all(math.isfinite(value) for value in one.values() if isinstance(value, float))
