"""Telling a command: its argument list as planned, no shell, the message as JSON on standard input."""

from __future__ import annotations

import os
import threading
from collections.abc import Mapping
from pathlib import Path

from auditd.alerts.attempt import DELIVERED, STOPPED, Attempt, failed
from auditd.alerts.child import run_child
from auditd.alerts.message import Message
from auditd.alerts.shown import first_line
from auditd.alerts.targets import program_of
from auditd.plan import Alert

COMMAND_TIMEOUT_S = 30.0
"""A command that has not ended by then is ended with its process group, and counts as failed."""
_KEPT = ("PATH", "HOME", "LANG", "TZ")


def clean_environment(environ: Mapping[str, str], kept: tuple[str, ...] = _KEPT) -> dict[str, str]:
    """Return the few variables that a program is given; the daemon's secrets are not among them."""
    return {"PATH": os.defpath} | {name: environ[name] for name in kept if name in environ}


def tell_command(
    alert: Alert,
    message: Message,
    *,
    folder: Path,
    stop: threading.Event,
    environ: Mapping[str, str] = os.environ,
    timeout_s: float = COMMAND_TIMEOUT_S,
) -> Attempt:
    """Run an alert's command over a message."""
    program = program_of(alert, folder)
    clean = clean_environment(environ)
    try:
        ended = run_child(
            [program, *alert.argv[1:]],
            given=message.document,
            environ=clean,
            folder=folder,
            timeout_s=timeout_s,
            stop=stop,
        )
    except (OSError, ValueError) as error:
        return failed(f"{program} cannot be started: {getattr(error, 'strerror', None) or error}")
    if ended.how == "stop":
        return STOPPED
    if ended.how == "limit":
        return failed(f"{program} had not ended after {timeout_s:g} s and was ended")
    if ended.code == 0:
        return DELIVERED
    how = f"signal {-ended.code}" if ended.code < 0 else f"exit status {ended.code}"
    said = first_line(ended.output)
    return failed(f"{program} ended with {how}" + (f": {said}" if said else ""))
