"""Stored runs as auditors take them: scales, labels of restarted levels, stages, what is set aside."""

import numpy as np
import pytest
from placed_runs import START, epoch, placed

from auditd.pipeline.entries import Entries
from auditd.plan_reading import parse_plan
from auditd.store.answers import Answer

TEXT = """
[record]
status = "t"
parent = "p"
[responses.y]
at = "y"
scale = "log"
[factors]
c = "c"
[nuisance]
host = "h"
"""
PLAN = parse_plan(TEXT)


def answer(**scope):
    return Answer(
        row=1, caution=1, answered_at=START, reason="r", action="set-aside", scope=scope, from_position=3
    )


def taken(runs, *, plan=PLAN, epochs=None, asides=(), first=0):
    return Entries(plan, epochs or [epoch()], asides, first).take(runs)


def test_values_are_on_the_audited_scale_and_what_is_not_audited_is_nan():
    """Logarithms, NaN for what failed or has none; `completed` counts every run."""
    runs = [placed(0, np.e), placed(1, -1.0), placed(2, 5.0, completed=False), placed(3, np.inf)]
    entries = taken(runs)
    np.testing.assert_allclose(entries.of("y", PLAN).values, [1, np.nan, np.nan, np.nan])
    assert entries.of("y", PLAN).nuisance == {"host": ["h1"] * 4}


def test_set_aside_applies_to_runs_to_come_only():
    """A level that was set aside is left out from the answer's position on, and no other level."""
    runs = [placed(k, 1.0, host=f"h{k % 2}") for k in range(6)]
    values = np.asarray(taken(runs, asides=[answer(host="h1")]).of("y", PLAN).values)
    assert np.isnan(values).tolist() == [False, False, False, True, False, True]


def test_a_stretch_that_has_ended_sets_no_later_run_aside():
    """From and to take out what is past, which the audit has bet on already."""
    runs = [placed(k, 1.0) for k in range(6)]
    values = np.asarray(taken(runs, asides=[answer(**{"from": "r0", "to": "r2"})]).of("y", PLAN).values)
    assert not np.isnan(values).any()


def test_a_restarted_level_is_ranked_apart_from_its_past():
    """From the new epoch on host h1 has cells of its own; h0 goes on in the old ones."""
    runs = [placed(k, 1.0, host=f"h{k % 2}") for k in range(6)]
    entries = taken(runs, epochs=[epoch(), epoch(2, 3, {"host": "h1"})])
    assert entries.of("y", PLAN).cells == ["c=a", "c=a", "c=a", "c=a #2", "c=a", "c=a #2"]


def test_two_restarts_of_one_level_are_two_labels():
    """The second repair does not bring the cells of the first back."""
    runs = [placed(k, 1.0) for k in range(6)]
    epochs = [epoch(), epoch(2, 2, {"host": "h1"}), epoch(3, 4, {"host": "h1"})]
    labels = taken(runs, epochs=epochs).of("y", PLAN).cells
    assert len(set(labels[:2])) == len(set(labels[2:4])) == len(set(labels[4:])) == 1
    assert len(set(labels)) == 3


def test_stages_rank_runs_within_themselves():
    """Where results steer what runs next, only runs of one stage are scored against each other."""
    plan = parse_plan(TEXT + '[design]\nallocation = "outcome"\nstage = "s"\n')
    labels = taken([placed(k, 1.0, stage=str(k // 2)) for k in range(4)], plan=plan).of("y", plan).cells
    assert labels[0] == labels[1] != labels[2] == labels[3]


def test_parents_are_indices_of_the_epoch_across_blocks():
    """A parent in an earlier block is found; one before the epoch, or unknown, is none."""
    entries = Entries(PLAN, [epoch()], (), 10)
    entries.take([placed(k, 1.0) for k in range(10, 13)])
    later = [placed(13, 1.0, parent="r11"), placed(14, 1.0, parent="r13"), placed(15, 1.0, parent="r2")]
    assert np.asarray(entries.take(later).of("y", PLAN).parents).tolist() == [1, 3, -1]
    entries.restart()
    assert np.asarray(entries.take(later).of("y", PLAN).parents).tolist() == [-1, 3, -1]


@pytest.mark.parametrize("size", [1, 2, 7])
def test_blocks_that_are_kept_add_up_to_one(size):
    """Taken at once or in blocks, the runs are the same."""
    runs = [placed(k, 1.0 + k, host=f"h{k % 3}", parent=f"r{k - 3}") for k in range(7)]
    entries = Entries(PLAN, [epoch()], (), 0)
    for first in range(0, 7, size):
        entries.take(runs[first : first + size], keep=True)
    one, other = entries.of("y", PLAN), taken(runs).of("y", PLAN)
    np.testing.assert_array_equal(one.values, other.values)
    np.testing.assert_array_equal(one.parents, other.parents)
    np.testing.assert_array_equal(one.times, other.times)
    assert (one.cells, one.ids, one.nuisance) == (other.cells, other.ids, other.nuisance)
