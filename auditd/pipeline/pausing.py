"""Pausing while the store cannot be written: said once, and tried again ever more rarely."""

from __future__ import annotations

import logging
import threading

from sqlalchemy.exc import DBAPIError

from auditd.errors import Unavailable

log = logging.getLogger("auditd")

RETRY_FIRST_S = 1.0
RETRY_MAX_S = 30.0
"""Back-off between two tries; well below the time after which systemd's watchdog thinks us dead."""
TROUBLES = (DBAPIError, OSError, Unavailable)
"""What passes by itself: a full disk, a locked store, a server that restarts."""


class Pausing:
    """What keeps the work from going on, if anything does.

    Parameters
    ----------
    stop : ends a wait.
    """

    def __init__(self, stop: threading.Event) -> None:
        self._stop = stop
        self._delay_s = RETRY_FIRST_S
        self.reason: str | None = None

    def wait_after(self, error: Exception) -> None:
        """Say what is wrong, once for each reason in a row, and wait until the next try is due."""
        reason = first_line(error)
        if reason != self.reason:
            log.error("paused: %s; trying again until it works, nothing is lost", reason)
        self.reason = reason
        self._stop.wait(self._delay_s)
        self._delay_s = min(2 * self._delay_s, RETRY_MAX_S)

    def over(self) -> bool:
        """Say that the work goes on, if it was paused; return whether it was."""
        was = self.reason is not None
        if was:
            log.warning("the store can be written again; nothing was lost")
        self.reason = None
        self._delay_s = RETRY_FIRST_S
        return was


def first_line(error: Exception) -> str:
    """Return an error's first line, without the statement that met it."""
    return str(getattr(error, "orig", None) or error).splitlines()[0]
