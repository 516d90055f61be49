"""Telling systemd how the daemon is, by datagrams to NOTIFY_SOCKET; without systemd nothing is told.

The protocol is sd_notify(3): lines of NAME=value to a Unix datagram socket, whose name begins with @ where
it is abstract.
"""

from __future__ import annotations

import os
import socket
import time
from collections.abc import Mapping

SEND_TIMEOUT_S = 1.0
"""A full socket is not waited for longer: the daemon's own work goes on."""


class Notifier:
    """The daemon's line to systemd; every call is harmless where there is none."""

    def __init__(self, environ: Mapping[str, str] = os.environ) -> None:
        self._address = _address(environ.get("NOTIFY_SOCKET", ""))

    @property
    def is_listened_to(self) -> bool:
        """Whether somebody asked to be told."""
        return self._address is not None

    def ready(self, status: str = "") -> None:
        """Tell that the first scan is done, or that a reload is."""
        self._tell("READY=1", *_status(status))

    def watchdog(self) -> None:
        """Tell that scan and audit progress."""
        self._tell("WATCHDOG=1")

    def stopping(self) -> None:
        """Tell that the daemon is about to end."""
        self._tell("STOPPING=1")

    def reloading(self) -> None:
        """Tell that the plan is being read again; `ready` ends it."""
        self._tell("RELOADING=1", f"MONOTONIC_USEC={time.monotonic_ns() // 1000}")

    def status(self, text: str) -> None:
        """Tell in one line what is being done, for `systemctl status`."""
        self._tell(*_status(text))

    def _tell(self, *lines: str) -> None:
        if self._address is None or not lines:
            return
        try:
            with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_CLOEXEC) as line:
                line.settimeout(SEND_TIMEOUT_S)
                line.sendto("\n".join(lines).encode(), self._address)
        except OSError:
            # a manager that went away is no reason to stop taking runs
            return


def watchdog_interval_s(environ: Mapping[str, str] = os.environ, pid: int | None = None) -> float | None:
    """Return how often to tell that all is well: half of what systemd waits; None where it does not wait.

    WATCHDOG_PID, where set, says for which process the limit is meant.
    """
    try:
        limit_us = int(environ.get("WATCHDOG_USEC", ""))
        meant_for = int(environ.get("WATCHDOG_PID", "") or (os.getpid() if pid is None else pid))
    except ValueError:
        return None
    if limit_us <= 0 or meant_for != (os.getpid() if pid is None else pid):
        return None
    return limit_us / 2e6


def _address(name: str) -> str | None:
    if name.startswith("@"):
        return "\0" + name[1:]
    return name if name.startswith("/") else None


def _status(text: str) -> tuple[str, ...]:
    """Return the line of a status; a line break in it would begin another message."""
    kept = " ".join("".join(sign if sign.isprintable() else " " for sign in text).split())
    return (f"STATUS={kept[:500]}",) if kept else ()
