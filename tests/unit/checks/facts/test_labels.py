"""Numbers for cells and levels."""

from auditd.checks.facts.labels import CellIndex, LevelIndex


def test_levels_are_told_apart_as_json_values():
    """true is not 1, and "1" is neither, though Python calls the first two equal."""
    levels, cells = LevelIndex(), CellIndex()
    stated = [1, True, "1", None, 2.5, 1]
    assert [levels.number(level) for level in stated] == [0, 1, 2, 3, 4, 0]
    assert levels.labels == ["1", "true", '"1"', "null", "2.5"]
    assert [cells.number({"threads": level, "mesh": "x"}) for level in stated] == [0, 1, 2, 3, 4, 0]
    assert cells.labels[:2] == ["threads=1 mesh=x", "threads=true mesh=x"]
