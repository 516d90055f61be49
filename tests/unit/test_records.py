"""Levels and labels: one text for one JSON value."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.records import Run, cell_label, level_label, normal_level

levels = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-(2**60), 2**60),
    st.floats(allow_nan=False, allow_infinity=False),
    st.text(),
)


@pytest.mark.parametrize(
    ("value", "level"),
    [
        (1.0, 1),
        (-0.0, 0),
        (0.1, 0.1),
        (2.0**53, 2.0**53),
        (True, True),
        (None, None),
        ("1", "1"),
        ([1, 2.0], "[1,2.0]"),
        ({"b": 1, "a": 2}, '{"a":2,"b":1}'),
    ],
)
def test_a_json_value_becomes_a_level(value, level):
    """Whole floats are integers, containers their text with sorted keys."""
    found = normal_level(value)
    assert found == level
    assert type(found) is type(level)


@pytest.mark.parametrize(
    ("level", "label"),
    [
        ("n3", "n3"),
        ("1", '"1"'),
        ("true", '"true"'),
        ("null", '"null"'),
        ('"x"', '"\\"x\\""'),
        ("", ""),
        (1, "1"),
        (True, "true"),
        (None, "null"),
        (0.1, "0.1"),
        ("[" * 100_000, "[" * 100_000),
    ],
)
def test_a_text_is_bare_unless_it_reads_like_another_value(level, label):
    """So that 1 and "1" are told apart wherever they are shown."""
    assert level_label(level) == label


@given(levels, levels)
def test_two_levels_have_one_label_only_when_they_are_one_json_value(one, other):
    """1 and 1.0 are one; true, 1 and "1" are three."""
    one, other = normal_level(one), normal_level(other)
    same = json.dumps(one) == json.dumps(other)
    assert (level_label(one) == level_label(other)) is same


def test_a_cells_label_names_its_factors():
    """In the plan's order; without factors there is one cell."""
    assert cell_label({"solver": "implicit", "mesh": 2}) == "solver=implicit mesh=2"
    assert cell_label({}) == "all"


def test_a_record_cannot_be_changed_nor_made_by_position():
    """Frozen and keyword-only."""
    fields = {"id": "r", "path": "p", "offset": 0, "number": 0, "cell": {}, "nuisance": {}, "responses": {}}
    run = Run(**fields, metadata={}, digest=b"")
    with pytest.raises(AttributeError):
        run.id = "other"
    with pytest.raises(TypeError):
        Run("r", "p")
