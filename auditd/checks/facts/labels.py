"""Small numbers for cells and levels, so that facts keep integers and not records."""

from __future__ import annotations

from collections.abc import Hashable

from auditd.records import Level, cell_label, level_label


def level_key(level: Level) -> Hashable:
    """Return what stands for a level in a dict: `true` and 1 are two levels, though Python calls "
    "them equal.
    """
    return (bool, level) if isinstance(level, bool) else level


class CellIndex:
    """Numbers the cells as they appear, and keeps each one's label."""

    def __init__(self) -> None:
        self.labels: list[str] = []
        self._numbers: dict[Hashable, int] = {}

    def number(self, cell: dict[str, Level]) -> int:
        """Return the cell's number, counted from 0 in the order of appearance."""
        key: Hashable = tuple(cell.values())
        if bool in map(type, cell.values()):
            key = tuple(map(level_key, cell.values()))
        number = self._numbers.get(key)
        if number is None:
            number = self._numbers[key] = len(self.labels)
            self.labels.append(cell_label(cell))
        return number


class LevelIndex:
    """Numbers the levels of one factor or nuisance as they appear, and keeps each one's label."""

    def __init__(self) -> None:
        self.labels: list[str] = []
        self._numbers: dict[Hashable, int] = {}

    def number(self, level: Level) -> int:
        """Return the level's number, counted from 0 in the order of appearance."""
        key = (bool, level) if isinstance(level, bool) else level
        number = self._numbers.get(key)
        if number is None:
            number = self._numbers[key] = len(self.labels)
            self.labels.append(level_label(level))
        return number
