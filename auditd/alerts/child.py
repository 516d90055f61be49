"""Running a program with a time limit that ends its whole process group, and with capped output."""

from __future__ import annotations

import contextlib
import os
import selectors
import signal
import subprocess
import tempfile
import threading
import time
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import IO, Literal

import msgspec

OUTPUT_LIMIT_BYTES = 64 * 1024
"""So much of a program's output is kept; the rest is read and dropped, so that the program goes on."""
GRACE_S = 2.0
"""Time between asking a process group to end and ending it."""
POLL_S = 0.05
"""How often the end of the program, the time limit and the stop are looked at."""


class Ended(msgspec.Struct, frozen=True, kw_only=True):
    """How a program ended: by itself with `code` (negative: a signal), at the time limit, or at a stop."""

    how: Literal["itself", "limit", "stop"]
    code: int
    output: bytes


def run_child(
    argv: Sequence[str],
    *,
    given: bytes,
    environ: Mapping[str, str],
    folder: Path,
    timeout_s: float,
    stop: threading.Event,
    merge_errors: bool = True,
) -> Ended:
    """Run a program by its argument list in a process group of its own, `given` on its standard input.

    Whatever is left of the group when the program ends is ended too. `merge_errors` reads standard error
    with the output; otherwise it is dropped.

    Raises
    ------
    OSError
        The program cannot be started.
    """
    with tempfile.TemporaryFile() as stdin:
        stdin.write(given)
        stdin.seek(0)
        child = subprocess.Popen(
            list(argv),
            stdin=stdin,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT if merge_errors else subprocess.DEVNULL,
            env=dict(environ),
            cwd=folder,
            start_new_session=True,
        )
    output = bytearray()
    with child.stdout or contextlib.nullcontext() as pipe:
        try:
            how = _follow(child, pipe, output, time.monotonic() + timeout_s, stop)
        finally:
            _end_group(child)
    return Ended(how=how, code=child.returncode, output=bytes(output))


def _follow(
    child: subprocess.Popen[bytes],
    pipe: IO[bytes] | None,
    output: bytearray,
    limit: float,
    stop: threading.Event,
) -> Literal["itself", "limit", "stop"]:
    """Read the output until the program ends, the limit is reached or a stop is asked for."""
    with selectors.DefaultSelector() as selector:
        handle = -1 if pipe is None else pipe.fileno()
        os.set_blocking(handle, False)
        selector.register(handle, selectors.EVENT_READ)
        while True:
            if selector.get_map():
                for _ in selector.select(POLL_S):
                    if _read_some(handle, output):
                        selector.unregister(handle)
            elif stop.wait(POLL_S):
                return "stop"
            if _has_ended(child):
                _read_rest(handle, output)
                return "itself"
            if stop.is_set():
                return "stop"
            if time.monotonic() >= limit:
                return "limit"


def _read_some(handle: int, output: bytearray) -> bool:
    """Read once and keep what fits; True at the end of the output."""
    try:
        body = os.read(handle, OUTPUT_LIMIT_BYTES)
    except BlockingIOError:
        return False
    output += body[: OUTPUT_LIMIT_BYTES - len(output)]
    return not body


def _read_rest(handle: int, output: bytearray) -> None:
    """Read what the pipe holds after the program's end, without waiting for heirs that keep it open."""
    with contextlib.suppress(BlockingIOError):
        while len(output) < OUTPUT_LIMIT_BYTES:
            body = os.read(handle, OUTPUT_LIMIT_BYTES)
            if not body:
                return
            output += body[: OUTPUT_LIMIT_BYTES - len(output)]


def _has_ended(child: subprocess.Popen[bytes]) -> bool:
    """Whether the program has ended; it is not reaped, so that its group's number stays its own."""
    return os.waitid(os.P_PID, child.pid, os.WEXITED | os.WNOHANG | os.WNOWAIT) is not None


def _end_group(child: subprocess.Popen[bytes]) -> None:
    if not _has_ended(child):
        _signal_group(child.pid, signal.SIGTERM)
        patience = time.monotonic() + GRACE_S
        while not _has_ended(child) and time.monotonic() < patience:
            time.sleep(POLL_S)
    _signal_group(child.pid, signal.SIGKILL)
    child.wait()


def _signal_group(group: int, number: signal.Signals) -> None:
    with contextlib.suppress(ProcessLookupError, PermissionError):
        os.killpg(group, number)
