"""The page kept fresh beside the daemon: drawn by a process of its own, so that no run waits for it."""

from __future__ import annotations

import contextlib
import logging
import os
import subprocess
import sys
import tempfile
import time
from typing import IO

from auditd.pipeline.session import Session
from auditd.plan import duration_s

log = logging.getLogger("auditd")

BUSY_SHARE = 0.05
"""At most this share of the time is spent on the page: the next one waits so much longer."""
TIMEOUT_S = 1800.0
"""A page that takes longer is given up."""
NICENESS = 10
"""Drawing yields to taking runs."""


class ReportKeeper:
    """Keeps the page fresh where the plan has a `[report]` section.

    Parameters
    ----------
    session : whose campaign is reported.
    """

    def __init__(self, session: Session) -> None:
        self._session = session
        stated = session.plan.report
        self._every_s = None if stated is None else duration_s(stated.every, "report.every")
        self._path = None if stated is None else session.plan.folder / stated.path
        self._due_at = 0.0
        self._n_shown = -1
        self._child: subprocess.Popen[bytes] | None = None
        self._said: IO[bytes] | None = None
        self._began = 0.0

    def refresh_if_due(self, now: float) -> bool:
        """Begin a new page if it is due and runs have come; return whether one was begun.

        `now` is POSIX seconds. A failure is said and tried again later, never raised.
        """
        if self._every_s is None or (self._child is not None and not self._is_over(now)):
            return False
        n = self._session.n_arrived
        if now < self._due_at or n == self._n_shown:
            return False
        self._due_at = now + self._every_s
        self._n_shown = n
        try:
            self._start()
        except OSError as error:
            log.warning("the report was not begun, it is tried again later: %s", error)
            self._n_shown = -1
            return False
        return True

    def close(self) -> None:
        """End the drawing that is going on, if one is."""
        if self._child is not None:
            self._child.kill()
            self._child.wait()
            self._forget()

    def _start(self) -> None:
        arguments = [sys.executable, "-P", "-m", "auditd", "--plan", str(self._session.plan.path)]
        self._said = tempfile.TemporaryFile()  # noqa: SIM115 - closed when the child has ended
        self._child = subprocess.Popen(
            [*arguments, "report", "-o", str(self._path)],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=self._said,
        )
        self._began = time.monotonic()
        with contextlib.suppress(OSError):
            os.setpriority(os.PRIO_PROCESS, self._child.pid, NICENESS)

    def _is_over(self, now: float) -> bool:
        """Look after the drawing that is going on; return whether it has ended."""
        child, took_s = self._child, time.monotonic() - self._began
        if child is None:
            return True
        if child.poll() is None:
            if took_s <= TIMEOUT_S:
                return False
            child.kill()
            child.wait()
        if child.returncode:
            log.warning("the report was not written, it is tried again later: %s", self._last_words())
            self._n_shown = -1
        self._due_at = max(self._due_at, now + took_s / BUSY_SHARE)
        self._forget()
        return True

    def _last_words(self) -> str:
        if self._said is None:
            return "no reason was given"
        self._said.seek(0)
        lines = self._said.read().decode(errors="replace").strip().splitlines()
        return lines[-1] if lines else "no reason was given"

    def _forget(self) -> None:
        if self._said is not None:
            self._said.close()
        self._child = self._said = None
