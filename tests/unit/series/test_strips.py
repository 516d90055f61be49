"""Strips and charts in plain characters: nothing lost at the extremes, nothing wider than a terminal."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from run_tables import table_of

from auditd.plan_reading import parse_plan
from auditd.series.strip_line import SIGNS, shortened, strip_line
from auditd.series.strips import N_BINS, strip
from auditd.series.terminal_chart import N_ROWS, chart_lines
from auditd.series.terminal_evidence import evidence_lines

PLAN = parse_plan('[responses.y]\nat = "y"\n[factors]\nc = "c"\n')
VALUES = st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=200)


@given(values=VALUES)
def test_extremes_survive_decimation(values):
    """However many runs a bin holds, the lowest and highest residual of all are in the strip."""
    y = np.array(values)
    found = strip(table_of({"y": y}), PLAN, "y")
    residuals = y - y.mean()
    assert len(found["mean"]) == min(N_BINS, len(y))
    assert min(found["low"]) == pytest.approx(residuals.min(), abs=1e-6)
    assert max(found["high"]) == pytest.approx(residuals.max(), abs=1e-6)
    assert (found["first"], found["last"], found["n"]) == (0, len(y) - 1, len(y))


def test_cells_own_levels_are_taken_off():
    """A difference between cells is no pattern of a strip."""
    y = np.array([0.0, 100.0] * 60)
    cells = [{"c": "ab"[k % 2]} for k in range(120)]
    assert np.abs(strip(table_of({"y": y}, cells=cells), PLAN, "y")["mean"]).max() < 1e-9


def test_no_runs_give_an_empty_strip():
    """Nothing completed is no error."""
    empty = strip(table_of({"y": np.full(5, np.nan)}), PLAN, "y")
    assert (empty["n"], empty["mean"], empty["first"]) == (0, [], None)


@given(values=VALUES, since=st.integers(-5, 300), raised=st.integers(-5, 300))
def test_a_chart_fits_80_columns_and_marks_only_what_lies_in_it(values, since, raised):
    """Every line of drawing fits; a mark outside the strip is not drawn anywhere."""
    drawn = chart_lines(strip(table_of({"y": np.array(values)}), PLAN, "y"), since=since, raised=raised)
    assert max(map(len, drawn)) <= 80
    marks = drawn[N_ROWS]
    assert ("^" in marks or "W" in marks) == (0 <= since < len(values) or 0 <= raised < len(values))
    assert all(character.isascii() and character.isprintable() for line in drawn for character in line)


def test_a_rising_response_rises_in_the_chart():
    """The mean stands in the lowest row at first and in the highest at last."""
    drawn = chart_lines(strip(table_of({"y": np.arange(600.0)}), PLAN, "y"), since=None, raised=None)
    columns = [[line[14 + k] == "o" for line in drawn[:11]].index(True) for k in range(N_BINS)]
    assert columns == sorted(columns, reverse=True)
    assert columns[0] - columns[-1] == 10


@given(path=st.lists(st.floats(-50, 500), max_size=256), threshold=st.floats(1, 12), at=st.integers(0, 600))
def test_the_evidence_fits_80_columns_at_any_length(path, threshold, at):
    """Paths of any length and height are drawn, the threshold always."""
    drawn = evidence_lines(path, first=3, width=2, threshold=threshold, raised=at)
    if not path:
        assert drawn == []
        return
    assert max(map(len, drawn[:-1])) <= 80
    assert any("-" in line[14:] or "#" in line[14:] for line in drawn[:7])


@given(means=st.lists(st.floats(-1e9, 1e9), max_size=80))
def test_a_strip_line_has_a_sign_a_bin(means):
    """One ASCII sign each, by how far a bin lies from zero; the order of values is kept."""
    line = strip_line(means)
    assert len(line) == len(means)
    assert set(line) <= set(SIGNS)
    ranks = [SIGNS.index(line[k]) for k in np.argsort(means, kind="stable")]
    assert ranks == sorted(ranks)


@given(name=st.text(max_size=40), width=st.integers(2, 20))
def test_names_are_shortened_visibly(name, width):
    """A name that does not fit ends in a tilde."""
    found = shortened(name, width)
    assert len(found) <= width
    assert found == name or found.endswith("~")
