"""The store as a SQLite file: connecting to it, and asking what it is without touching it."""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing, suppress
from pathlib import Path
from typing import Literal

from auditd.errors import StoreDamaged, StoreError

BUSY_TIMEOUT_MS = 10_000
"""How long a writer waits for another short transaction before it gives up."""
WAL_LIMIT_BYTES = 64 * 1024 * 1024
"""Size to which the write-ahead log is cut back after a checkpoint."""
_HEADER = b"SQLite format 3\x00"
_NOT_OURS = "name another file in store.url"


def connect_file(file: Path, *, read_only: bool, durable: bool = True) -> sqlite3.Connection:
    """Return a connection to an existing file, transactions left to the caller.

    A reader never writes to the file, nor checkpoints the log of another process into it. Where the reader
    may not write and there is no log, which a holder keeps as long as it works, it reads the file alone:
    SQLite could not make the shared memory that a log needs.
    """
    if not read_only:
        return _set_up_writer(_connect(file, "rw"), durable=durable)
    alone = not os.path.exists(f"{file}-wal") and not may_write(file)
    raw = _connect(file, "ro", immutable=alone)
    raw.execute("PRAGMA query_only=ON")
    raw.execute("PRAGMA cache_size=-32000")
    return raw


def may_write(file: Path) -> bool:
    """Whether this process may write a file and make others beside it, as a log needs."""
    return all(os.access(path, os.W_OK, effective_ids=True) for path in (file, file.parent))


def file_revision(file: Path) -> str | None:
    """Return the revision of the schema in a file, or None in an empty database; the file is not touched.

    Raises
    ------
    StoreDamaged
        The file is no SQLite database, or its first pages are broken.
    StoreError
        The file cannot be opened, or is a database of another program.
    """
    _check_header(file)
    if not _has_log(file):
        # no log, hence nothing newer than the file: it is read without any lock or shared memory
        with suppress(sqlite3.Error):
            return _revision(_connect(file, "ro", immutable=True), file)
    try:
        return _revision(_connect(file, "ro"), file)
    except sqlite3.DatabaseError as error:
        raise _told(file, error) from error


def _revision(connection: sqlite3.Connection, file: Path) -> str | None:
    with closing(connection):
        tables = {row[0] for row in connection.execute("SELECT name FROM sqlite_master WHERE type='table'")}
        if not tables:
            return None
        if "alembic_version" in tables:
            row = connection.execute("SELECT version_num FROM alembic_version").fetchone()
            if row is not None and str(row[0]).isdigit():
                return str(row[0])
    raise StoreError(f"{file} is a database, but not a store of this program; {_NOT_OURS}")


def _check_header(file: Path) -> None:
    try:
        with file.open("rb") as opened:
            header = opened.read(len(_HEADER))
    except OSError as error:
        raise StoreError(f"{file} cannot be read: {error.strerror}; check its folder") from error
    if header not in {_HEADER, b""}:
        raise StoreDamaged(
            f"{file} is no SQLite database, or its first page is damaged; it is left as found: {_NOT_OURS}, "
            "or put a backup in its place"
        )


def _told(file: Path, error: sqlite3.DatabaseError) -> StoreError:
    """Return the error of this program for an error of SQLite."""
    reason = str(error)
    if "malformed" in reason or "not a database" in reason:
        return StoreDamaged(
            f"{file} is damaged ({reason}) and left as found: run `runaudit store verify`, "
            "then name a new file in store.url and gather the landed files again"
        )
    hint = "check its folder" if may_write(file) else "it is read-only here"
    return StoreError(f"{file} cannot be opened ({reason}); {hint}")


def _has_log(file: Path) -> bool:
    try:
        return os.stat(f"{file}-wal").st_size > 0
    except OSError:
        return False


def _connect(file: Path, mode: Literal["ro", "rw"], *, immutable: bool = False) -> sqlite3.Connection:
    address = f"file:{_quoted(file)}?mode={mode}" + ("&immutable=1" if immutable else "")
    return sqlite3.connect(
        address, uri=True, timeout=BUSY_TIMEOUT_MS / 1000, isolation_level=None, check_same_thread=False
    )


def _set_up_writer(raw: sqlite3.Connection, *, durable: bool) -> sqlite3.Connection:
    try:
        raw.execute("PRAGMA journal_mode=WAL")
        raw.execute(f"PRAGMA synchronous={'FULL' if durable else 'NORMAL'}")
        raw.execute(f"PRAGMA journal_size_limit={WAL_LIMIT_BYTES}")
        raw.execute("PRAGMA foreign_keys=ON")
        raw.execute("PRAGMA cache_size=-32000")
    except BaseException:
        raw.close()
        raise
    return raw


def _quoted(path: Path) -> str:
    return os.path.abspath(path).replace("%", "%25").replace("?", "%3f").replace("#", "%23")
