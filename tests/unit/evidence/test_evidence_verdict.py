"""Verdicts against the margin, and the runs still needed."""

from dataclasses import replace

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.evidence import contrast, runs_needed, verdict


def made(estimate, half, df=1e6):
    """A comparison with a chosen estimate and half-width."""
    rng = np.random.default_rng(0)
    found = contrast(rng.standard_normal(40), cells=np.arange(40) % 2, a=0, b=1)
    return replace(found, estimate=estimate, low=estimate - half, high=estimate + half, df=df, n=100)


def test_beyond_needs_the_whole_interval_outside():
    """An interval wholly outside ± margin is beyond it, on either side; one that only excludes 0 is not."""
    assert verdict(made(5.0, 2.0), 2.5) == "beyond the margin"
    assert verdict(made(-5.0, 2.0), 2.5) == "beyond the margin"
    assert verdict(made(5.0, 2.0), 3.5) == "undecided"


def test_within_uses_two_one_sided_tests():
    """The interval at 1 − 2α decides: 1.645 of 1.960 of the half-width at 95 %."""
    assert verdict(made(0.0, 1.960), 1.66) == "within the margin"
    assert verdict(made(0.0, 1.960), 1.63) == "undecided"


def test_a_comparison_that_cannot_be_estimated_is_undecided():
    """Without an estimate there is neither verdict nor number."""
    found = contrast(
        np.random.default_rng(1).standard_normal(40),
        cells=np.arange(40) % 2,
        a=0,
        b=1,
        nuisance={"h": np.arange(40) % 2},
    )
    assert verdict(found, 1.0) == "undecided"
    assert runs_needed(found, 1.0) is None


def test_runs_needed_follow_the_square_of_the_width():
    """Half the distance to the margin needs four times the runs; decided needs none; on the margin no
    number helps."""
    assert runs_needed(made(3.0, 2.0), 2.0) == 300
    assert runs_needed(made(5.0, 2.0), 2.5) == 0
    assert runs_needed(made(2.0, 2.0), 2.0) is None


def test_more_runs_on_the_same_hosts_do_not_decide_what_hosts_differ_in():
    """A floor of the half-width: at or above the distance to the margin no number helps; below, 100·((4 −
    0.25)/(1 − 0.25) − 1) more runs, in place of 300."""
    assert runs_needed(replace(made(3.0, 2.0), floor=1.2, floor_of="host"), 2.0) is None
    assert runs_needed(replace(made(3.0, 2.0), floor=0.5, floor_of="host"), 2.0) == 400


def test_runs_needed_to_show_equivalence_use_the_narrower_interval():
    """Inside the margin the one-sided interval decides: 100·((1.645/1.96·2/1)² − 1) more runs."""
    assert runs_needed(made(0.0, 2.0), 1.0) == pytest.approx(100 * ((1.6449 / 1.95996 * 2) ** 2 - 1), abs=1)


@pytest.mark.parametrize("margin", [0, -1.0, float("nan"), float("inf"), "2", True])
def test_a_margin_is_a_positive_number(margin):
    """Anything else is bad input."""
    with pytest.raises(BadInput, match="margin"):
        verdict(made(0.0, 1.0), margin)
