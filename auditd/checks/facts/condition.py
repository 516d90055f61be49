"""A condition that grows: how often it was seen, where first, and whether that has been told."""

from __future__ import annotations

GROWTH = 1.1
"""A condition is told again when it has grown by this factor: each time up to ten, then ever more rarely."""
N_QUIET_ARRIVALS = 200
"""Arrivals without a new instance after which the next one is a new condition, so that what was answered
does not hide what comes later. About a day's runs in the campaigns that this was tried on."""
N_CELLS_LISTED = 20
"""Cells that a finding names; the message counts the others."""


class Condition:
    """One condition under one key.

    Attributes
    ----------
    key : names the condition.
    run : the run at which it began.
    n : how often it has been seen.
    cells : labels of the cells concerned, with how often, in the order of appearance.
    changed : whether instances were taken back since it was last told.
    """

    def __init__(self, key: str, run: str | None) -> None:
        self.key = key
        self.run = run
        self.n = 0
        self.cells: dict[str, int] = {}
        self.changed = False
        self._next = 1

    def seen(self, cell: str | None = None) -> bool:
        """Count one more instance; return whether it is to be told: at the first, and when it has grown."""
        self.n += 1
        if cell is not None:
            self.cells[cell] = self.cells.get(cell, 0) + 1
        if self.n < self._next:
            return False
        self._next = next_told(self.n)
        return True

    def unseen(self, cell: str | None = None) -> None:
        """Take one instance back."""
        self.n -= 1
        self.changed = True
        self._next = min(self._next, self.n + 1)
        if cell is not None and cell in self.cells:
            self.cells[cell] -= 1
            if not self.cells[cell]:
                del self.cells[cell]

    def listed_cells(self) -> tuple[str, ...]:
        """Return the cells that a finding names."""
        return tuple(self.cells)[:N_CELLS_LISTED]


class Episodes:
    """Numbers the stretches of arrivals in which instances follow each other closely."""

    def __init__(self) -> None:
        self._number = 0
        self._last: int | None = None

    def number(self, arrival: int) -> int:
        """Return the episode, counted from 1, that an instance at this arrival belongs to."""
        if self._last is None or arrival - self._last > N_QUIET_ARRIVALS:
            self._number += 1
        self._last = arrival
        return self._number


def next_told(n: int) -> int:
    """Return the count from which something that was told at `n` is told again."""
    return max(n + 1, int(n * GROWTH))


def counted(n: int, one: str, many: str | None = None) -> str:
    """Return `1 run`, `2 runs`."""
    return f"{n:,} {one if n == 1 else many or one + 's'}"
