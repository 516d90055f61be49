"""`report`: one self-contained page of a campaign, written whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
import time
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import IO

import msgspec

from auditd.errors import CannotCreate
from auditd.pipeline.campaign import Campaign


class Written(msgspec.Struct, frozen=True, kw_only=True):
    """A page that was written."""

    path: Path
    n_bytes: int
    took_s: float


def report_html(campaign: Campaign, now: datetime) -> str:
    """Return the page; the same store and the same `now` give the same bytes."""
    from auditd.pipeline.report_facts import report_facts
    from auditd.pipeline.report_page import content_of
    from auditd.report.page import page_html

    return page_html(content_of(report_facts(campaign, now)))


def write_report(campaign: Campaign, path: Path, now: datetime) -> Written:
    """Write the page, atomically: a reader sees the old page or the new one.

    Raises
    ------
    CannotCreate
        The file cannot be written there.
    """
    began = time.monotonic()
    _writable(path)
    data = report_html(campaign, now).encode("utf-8", "backslashreplace")
    with replaced_file(path) as stream:
        stream.write(data)
    return Written(path=path, n_bytes=len(data), took_s=time.monotonic() - began)


def clock_now() -> datetime:
    """Return the clock's time, or that of SOURCE_DATE_EPOCH where a page is to be made again."""
    stated = os.environ.get("SOURCE_DATE_EPOCH")
    if stated is not None and stated.isascii() and stated.isdigit():
        return datetime.fromtimestamp(int(stated), UTC)
    return datetime.now(UTC).replace(microsecond=0)


def _writable(path: Path) -> None:
    """Complain before the work is done, not after."""
    folder = path.parent
    if path.is_dir():
        raise CannotCreate(f"{path} is a folder; name a file with -o")
    if not folder.is_dir():
        raise CannotCreate(f"{path}: there is no folder {folder}; make it first")


@contextlib.contextmanager
def replaced_file(path: Path) -> Iterator[IO[bytes]]:
    """Open a file beside a place, and put it there when it is complete; after an error nothing has changed.

    Raises
    ------
    CannotCreate
        It cannot be written.
    """
    _writable(path)
    name = None
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name}.", suffix=".part", dir=path.parent)
        with os.fdopen(handle, "wb") as stream:
            yield stream
            stream.flush()
            os.fsync(stream.fileno())
        os.chmod(name, 0o644)
        os.replace(name, path)
        name = None
    except OSError as error:
        raise CannotCreate(f"{path} cannot be written: {error.strerror or error}") from error
    finally:
        if name is not None:
            with contextlib.suppress(OSError):
                os.unlink(name)
