"""The size of a SQLite store's write-ahead log: cut back when nobody needs it, watched while somebody does.

A reader that holds a snapshot keeps SQLite from beginning the log anew, and it grows with every commit. The
log is bounded by not writing more until that reader has ended; what has landed waits in its files.
"""

from __future__ import annotations

import os

import msgspec
from sqlalchemy import Engine

from auditd.store.sqlite_file import WAL_LIMIT_BYTES

WAL_PAUSE_BYTES = 16 * WAL_LIMIT_BYTES
"""From this size on (1 GiB) taking runs pauses: a campaign of 10,000 runs a day needs days to come to it."""


class LogState(msgspec.Struct, frozen=True, kw_only=True):
    """The log's size, whether a reader keeps it from being cut back, and whether to wait for that reader."""

    n_bytes: int
    is_held: bool
    must_wait: bool


_SMALL = LogState(n_bytes=0, is_held=False, must_wait=False)


def tend_log(
    engine: Engine, *, limit_bytes: int = WAL_LIMIT_BYTES, pause_bytes: int = WAL_PAUSE_BYTES
) -> LogState:
    """Cut the log back where it is over the limit; call between two transactions of the writer.

    Readers that come and go overlap, so that SQLite's own checkpoints may never find the moment to begin the
    log anew; here the moment is waited for, for a short while only.
    """
    if engine.url.get_backend_name() != "sqlite":
        return _SMALL
    name = f"{engine.url.database}-wal"
    n_bytes = _size(name)
    if n_bytes <= limit_bytes:
        return LogState(n_bytes=n_bytes, is_held=False, must_wait=False)
    raw = engine.raw_connection()
    try:
        raw.cursor().execute("PRAGMA busy_timeout=200")
        is_held = bool(raw.cursor().execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()[0])
    finally:
        raw.close()
    n_bytes = _size(name)
    return LogState(n_bytes=n_bytes, is_held=is_held, must_wait=is_held and n_bytes > pause_bytes)


def _size(name: str) -> int:
    try:
        return os.stat(name).st_size
    except OSError:
        return 0
