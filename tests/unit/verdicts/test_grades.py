"""Grades: by consequence, rising at once and falling late."""

import itertools

import pytest

from auditd.records import GRADES
from auditd.verdicts.grades import GradeHold, grade, graded_share


@pytest.mark.parametrize(
    ("loss_low", "expected"),
    [(0.0, "note"), (0.0999, "note"), (0.1, "material"), (0.5, "material"), (0.501, "severe")],
)
def test_a_dependence_is_graded_by_the_lower_bound_of_its_loss(make_finding, loss_low, expected):
    """Below 10 % a note, to 50 % material, above severe."""
    assert grade(make_finding(), loss_low=loss_low) == expected


def test_a_small_loss_beyond_the_margin_is_material(make_finding):
    """A shift that certainly exceeds the margin matters, whatever share of the runs it is worth."""
    assert grade(make_finding(), loss_low=0.02, beyond_margin=True) == "material"
    assert grade(make_finding(), loss_low=0.7, beyond_margin=True) == "severe"


def test_what_makes_a_planned_comparison_impossible_is_severe_whatever_its_kind(make_finding):
    """Not estimable is the worst that can be."""
    for kind in ("drift", "confound", "seed", "repeat"):
        assert grade(make_finding(kind), loss_low=0.0, estimable=False) == "severe"


@pytest.mark.parametrize("kind", ["silence", "plan", "rewrite", "gap", "time", "seed", "lineage"])
def test_facts_without_a_loss_are_material(make_finding, kind):
    """Kinds that design names as material, also when a comparison is touched."""
    assert grade(make_finding(kind)) == "material"
    assert grade(make_finding(kind), touches_planned=True) == "material"


@pytest.mark.parametrize("kind", ["failure", "cap", "confound", "order"])
def test_facts_that_touch_a_planned_comparison_are_severe(make_finding, kind):
    """Else they are material."""
    assert grade(make_finding(kind), touches_planned=True) == "severe"
    assert grade(make_finding(kind), touches_planned=False) == "material"


@pytest.mark.parametrize(("share", "expected"), [(0.01, "note"), (0.2, "material"), (0.95, "severe")])
def test_repeats_are_graded_by_the_share_of_runs_repeated(make_finding, share, expected):
    """One answer in a hundred is a note, a cell that is all one result severe."""
    assert grade(make_finding("repeat", share=share), touches_planned=True) == expected
    assert graded_share(share) == expected


def test_a_dependence_whose_loss_is_not_known_yet_is_material(make_finding):
    """Certain, and not known to be small."""
    assert grade(make_finding()) == "material"


def test_a_grade_rises_at_once():
    """One look is enough."""
    hold = GradeHold()
    assert [hold.observe(n, seen) for n, seen in ((10, "note"), (11, "material"), (12, "severe"))] == list(
        GRADES
    )


def test_a_grade_falls_only_after_fifty_runs_below():
    """At 49 runs it still stands, at 50 it falls; a single look above starts the count anew."""
    hold = GradeHold(held="severe")
    assert hold.observe(100, "note") == "severe"
    assert hold.observe(149, "note") == "severe"
    assert hold.observe(150, "note") == "note"
    hold = GradeHold(held="material")
    assert hold.observe(100, "note") == "material"
    assert hold.observe(140, "material") == "material"
    assert hold.observe(160, "note") == "material"
    assert hold.observe(209, "note") == "material"
    assert hold.observe(210, "note") == "note"


def test_a_grade_falls_to_the_highest_of_the_fifty_runs():
    """Severe, then material and note by turns: it falls to material."""
    hold = GradeHold(held="severe")
    shown = [
        hold.observe(100 + 10 * k, seen)
        for k, seen in enumerate(itertools.islice(itertools.cycle(["material", "note"]), 7))
    ]
    assert shown == ["severe"] * 5 + ["material"] * 2


def test_flutter_about_a_bar_shows_one_grade():
    """A bound that crosses 10 % at every look is material throughout."""
    hold = GradeHold()
    shown = [hold.observe(n, "material" if n % 2 else "note") for n in range(1, 300)]
    assert set(shown) == {"material"}
