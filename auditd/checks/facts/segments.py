"""Wealth that is staked in parts, so that what begins late is found after long good behaviour."""

from __future__ import annotations

import math

N_SEGMENT = 2000
"""Runs after which a bettor starts afresh with the next part of the stake; a longer segment loses more by
bets that do not pay, a shorter one more by starting again."""
ENOUGH = 1e200
"""Wealth at which betting in a segment ends: stopping is allowed at any time, and floats end at 1e308."""


class Segments:
    """Parts of a stake of 1, one a segment: 1/2, 1/6, 1/12 …, which add up to 1.

    A part that has been bet on during its segment is kept as it stands at the segment's end. Where each
    segment's wealth has expectation at most its stake, given all before, so has the sum at any stopping
    time.

    Attributes
    ----------
    n : runs in the segment so far.
    wealth : the segment's wealth by now, its stake at first.
    """

    __slots__ = ("_kept", "_number", "n", "wealth")

    def __init__(self) -> None:
        self._kept = 0.0
        self._number = 1
        self.n = 0
        self.wealth = 0.5

    def begin(self) -> None:
        """Keep the segment's wealth, and stake the next part."""
        self._kept += self.wealth
        self._number += 1
        self.n = 0
        self.wealth = 1.0 / (self._number * (self._number + 1))

    def log_e(self) -> float:
        """Return the log of the whole wealth; what is not staked yet counts for nothing."""
        return math.log(max(self._kept + self.wealth, 1e-300))

    @property
    def total(self) -> float:
        """The whole wealth."""
        return self._kept + self.wealth
