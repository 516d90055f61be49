"""How often a landing is listed: often while things land, seldom when idle, and never at much cost."""

from __future__ import annotations

EVENTS_S = 30.0
"""Between two listings where events wake (design.md, section 5)."""
_FIRST_POLL_S = 1.0
_LAST_POLL_S = 30.0
_IDLE_SHARE = 1 / 400
_BUSY_SHARE = 1 / 20
"""A listing takes at most these shares of one core, while nothing or something lands."""
ROTATION_S = 600.0
"""Every file that was taken is looked at once within this time (design.md, section 5)."""


class Pace:
    """The time between listings.

    Attributes
    ----------
    polls : whether no events wake, so that listings alone find what lands.
    """

    LONGEST_S = 300.0

    def __init__(self) -> None:
        self.polls = False
        self._interval_s = _FIRST_POLL_S

    def interval_s(self, cost_s: float, *, changed: bool) -> float:
        """Return the time until the next listing, after one that cost so much."""
        self._interval_s = _FIRST_POLL_S if changed else min(_LAST_POLL_S, self._interval_s * 2)
        share = _BUSY_SHARE if changed else _IDLE_SHARE
        least_s = self._interval_s if self.polls else EVENTS_S
        return min(self.LONGEST_S, max(least_s, cost_s / share))
