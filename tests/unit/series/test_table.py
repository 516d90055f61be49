"""A response of the table as a series: only runs that can be analysed, indices kept in step."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from run_tables import coded, table_of

from auditd.plan_reading import parse_plan

PLAN = parse_plan('[responses.y]\nat = "y"\nscale = "log"\n')


def made(**changed):
    y = np.array([1.0, np.e, np.nan, -1.0, np.inf, 2.0, 3.0])
    return table_of({"y": y, "completed": np.ones(7)}, nuisance={"host": list("abababa")}, **changed)


def test_only_completed_finite_values_on_the_scale_enter():
    """NaN, infinity, what has no logarithm, what failed and what was set aside stay out."""
    completed = np.array([True] * 5 + [False, True])
    aside = np.array([True] + [False] * 6)
    table = made(completed=completed, set_aside=aside)
    assert table.series(PLAN, "y").ids.tolist() == ["r0001", "r0006"]
    assert table.series(PLAN, "y", with_set_aside=True).ids.tolist() == ["r0000", "r0001", "r0006"]
    assert table.series(PLAN, "completed").ids.tolist() == [f"r{k:04d}" for k in range(1, 7)]


def test_every_column_of_a_series_is_of_the_same_runs():
    """Values, rows, places, labels and times belong to one run each."""
    table = made()
    series = table.series(PLAN, "y")
    for k, row in enumerate(series.row):
        assert series.values[k] == np.log(table.responses["y"][row])
        assert series.nuisance["host"].labels()[k] == "abababa"[row]
        assert (series.positions[k], series.started[k]) == (row, table.started[row])


@given(data=st.data(), n=st.integers(1, 25))
def test_parents_point_at_the_kept_parent_or_at_none(data, n):
    """After runs are left out, a parent's index is the parent's, and -1 where it was left out."""
    parents = np.array([data.draw(st.integers(-1, n - 1)) for _ in range(n)])
    kept = np.array([data.draw(st.booleans()) for _ in range(n)])
    table = table_of({"y": np.arange(1.0, n + 1)}, parents=parents, completed=kept)
    series = table.series(PLAN, "y")
    for k, row in enumerate(series.row):
        parent = parents[row]
        expected = f"r{parent:04d}" if parent >= 0 and kept[parent] else None
        found = series.parents[k]
        assert (None if found < 0 else series.ids[found]) == expected


@given(labels=st.lists(st.sampled_from("abcd"), max_size=30))
def test_codes_and_labels_are_each_others_inverse(labels):
    """Labels come back as they went in, also of some of the runs."""
    made_of = coded(labels)
    assert made_of.labels().tolist() == labels
    some = np.arange(0, len(labels), 2)
    assert made_of.take(some).labels().tolist() == labels[::2]
