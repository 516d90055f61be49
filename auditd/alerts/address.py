"""Reading an alert's address from its file or the environment; it is said to nobody else."""

from __future__ import annotations

import os
import stat
from collections.abc import Mapping
from pathlib import Path

from auditd.errors import PlanError
from auditd.plan import Alert

ADDRESS_LIMIT_BYTES = 8192
"""Longer than any address; a larger file is not one."""
_OTHERS = stat.S_IRGRP | stat.S_IWGRP | stat.S_IROTH | stat.S_IWOTH


def read_address(alert: Alert, folder: Path, environ: Mapping[str, str] = os.environ) -> str:
    """Return the address of an alert.

    Raises
    ------
    PlanError
        The file or variable is missing, or others may read the file; the message never holds the address.
    """
    if alert.url_env is not None:
        text = environ.get(alert.url_env, "")
        where = f"the variable {alert.url_env}"
        if not text.strip():
            raise PlanError(f"{where} is not set; set it where the daemon is started")
    else:
        file = folder / (alert.url_file or "")
        where, text = f"the file {file}", _read_private(file)
    lines = [line.strip() for line in text.splitlines()]
    lines = [line for line in lines if line and not line.startswith("#")]
    if len(lines) != 1:
        raise PlanError(f"{where} holds {len(lines)} addresses; write one, on a line of its own")
    return lines[0]


def _read_private(file: Path) -> str:
    try:
        handle = os.open(file, os.O_RDONLY | os.O_CLOEXEC | os.O_NONBLOCK)
    except OSError as error:
        raise PlanError(f"the address in {file} cannot be read: {error.strerror}") from error
    try:
        _refuse_open_to_others(file, os.fstat(handle))
        body = os.read(handle, ADDRESS_LIMIT_BYTES + 1)
    finally:
        os.close(handle)
    if len(body) > ADDRESS_LIMIT_BYTES:
        raise PlanError(f"{file} holds more than {ADDRESS_LIMIT_BYTES} bytes; write one address into it")
    try:
        return body.decode()
    except UnicodeDecodeError:
        # the cause would show bytes of the secret
        raise PlanError(f"{file} is not text in UTF-8; write one address into it") from None


def _refuse_open_to_others(file: Path, found: os.stat_result) -> None:
    if not stat.S_ISREG(found.st_mode):
        raise PlanError(f"{file} is not a regular file; write the address into one")
    if found.st_mode & _OTHERS:
        mode = stat.filemode(found.st_mode)
        raise PlanError(f"{file} may be read or written by others ({mode}); run `chmod 600` on it")
    if found.st_uid not in {0, os.geteuid()}:
        raise PlanError(f"{file} belongs to another user (uid {found.st_uid}); give it to the daemon's user")
