"""What a finding costs the planned comparisons, and the grade that follows."""

import numpy as np
import pytest
from run_tables import table_of

from auditd.pipeline.consequences import consequence_of, grade_of
from auditd.plan_reading import parse_plan
from auditd.records import Effect, Finding

TEXT = """
[responses.y]
at = "y"
margin = 0.5
[responses.z]
at = "z"
[factors]
s = "s"
m = "m"
[nuisance]
host = "h"
"""
PLANNED = TEXT + '[[comparisons]]\nresponse = "y"\nbetween = [{s = "a", m = 1}, {s = "b", m = 1}]\n'
N = 240


def made(step=0.0, aliased=False):
    rng = np.random.default_rng(8)
    cells = [{"s": "ab"[k % 2], "m": 1 + k // 2 % 2} for k in range(N)]
    hosts = [f"n{k % 2}" if aliased else f"n{k // 4 % 3}" for k in range(N)]
    y = rng.normal(size=N)
    for k in range(1, N):
        y[k] += step * y[k - 1]
    return table_of({"y": y, "z": rng.normal(size=N)}, cells=cells, nuisance={"host": hosts})


def finding(kind="serial", **fields):
    stated = {"key": "k", "message": "", "response": "y", "along": "order", "since": 0, "index": 30}
    return Finding(kind=kind, **(stated | fields))


def test_facts_and_findings_without_a_response_cost_nothing_that_can_be_told():
    """A fact has no evidence loss of its own."""
    for one in (finding("seed"), finding("serial", response=None)):
        consequence, low = consequence_of(one, made(), parse_plan(PLANNED))
        assert (consequence.loss, low) == (None, None)


@pytest.mark.parametrize("text", [TEXT, PLANNED])
def test_losses_lie_between_0_and_1_with_their_bound_below(text):
    """With and without comparisons, and with strong dependence, a loss is a share and its bound no larger."""
    for strength in (0.0, 0.7):
        consequence, low = consequence_of(finding(), made(strength), parse_plan(text))
        assert 0 <= low <= consequence.loss <= 1
        assert consequence.n_lost >= 0


def test_runs_lost_and_evidence_lost_tell_one_story():
    """Where no comparison loses anything the remedy costs no runs."""
    consequence, _ = consequence_of(finding("drift"), made(), parse_plan(PLANNED))
    assert (consequence.loss < 0.02) == (consequence.n_lost < 0.02 * N)


@pytest.mark.parametrize(
    ("one", "expected"),
    [
        (finding("failure", response=None, cells=("s=a m=1",)), "severe"),
        (finding("failure", response=None, cells=("s=a m=2",)), "material"),
        (finding("confound", response=None, along="s", cells=()), "severe"),
        (finding("confound", response="z", along="s", cells=("s=a m=1",)), "material"),
        (finding("seed", response=None), "material"),
        (finding("repeat", response=None, share=0.6), "severe"),
        (finding("repeat", response=None, share=0.2), "material"),
        (finding("repeat", response=None, share=0.01), "note"),
    ],
)
def test_facts_are_graded_by_the_comparisons_they_touch(one, expected):
    """A failure in a compared cell is severe, in another material; repeats go by their share (design, 12)."""
    assert grade_of(one, made(), parse_plan(PLANNED), None) == expected


@pytest.mark.parametrize(
    ("low", "high", "kind", "expected"),
    [
        (0.6, 1.4, "drift", "material"),
        (-1.4, -0.6, "drift", "material"),
        (0.2, 1.4, "drift", "note"),
        (-0.4, 0.4, "drift", "note"),
        (0.6, 1.4, "spread", "note"),
    ],
)
def test_a_shift_beyond_the_margin_is_no_note(low, high, kind, expected):
    """A shift that certainly exceeds the margin is material, whatever is lost; a ratio is no shift."""
    one = finding(kind, effect=Effect(name="shift", value=(low + high) / 2, low=low, high=high))
    assert grade_of(one, made(), parse_plan(PLANNED), 0.0) == expected


@pytest.mark.parametrize(
    ("low", "expected"), [(0.0, "note"), (0.1, "material"), (0.5, "material"), (0.51, "severe")]
)
def test_grades_go_by_the_lower_bound_of_the_loss(low, expected):
    """Below a tenth is a note, above a half severe (design, section 2)."""
    assert grade_of(finding(), made(), parse_plan(PLANNED), low) == expected


def test_a_comparison_that_cannot_be_estimated_is_severe():
    """Solver and host are one: whatever is found there is severe."""
    one = finding("confound", along="s", response=None, cells=("s=a m=1",))
    assert grade_of(one, made(aliased=True), parse_plan(PLANNED), None) == "severe"
