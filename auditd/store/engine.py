"""Connections to the store: one that writes, short ones that append, and ones that read."""

from __future__ import annotations

import os
import sqlite3
from pathlib import Path
from typing import Any

from sqlalchemy import Engine, create_engine, event, text
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError, OperationalError
from sqlalchemy.pool import NullPool

from auditd.errors import StoreDamaged, StoreError, StoreNewer, Unavailable
from auditd.store.tables import REVISION

BUSY_TIMEOUT_MS = 10_000
"""How long a writer waits for another short transaction before it gives up."""
WAL_LIMIT_BYTES = 64 * 1024 * 1024
"""Size to which the write-ahead log is cut back after a checkpoint."""


def open_engine(url: URL, *, read_only: bool = False, durable: bool = True) -> Engine:
    """Return an engine on an existing store.

    `durable` keeps every commit through a power cut (synchronous=FULL).

    Raises
    ------
    StoreError
        There is no store yet, or it is of another revision (`StoreNewer`) or damaged (`StoreDamaged`).
    Unavailable
        A store server does not answer.
    """
    if url.get_backend_name() == "sqlite" and not Path(url.database or "").is_file():
        raise StoreError(f"no store at {url.database}; run `runaudit gather` or `runaudit watch` first")
    engine = connect_engine(url, read_only=read_only, durable=durable)
    _check_revision(engine, url)
    return engine


def shown_url(url: URL) -> str:
    """Return the store's address without a password, for messages."""
    return url.database or "" if url.get_backend_name() == "sqlite" else url.render_as_string()


def connect_engine(url: URL, *, read_only: bool, durable: bool) -> Engine:
    """Return an engine without asking what the database holds."""
    if url.get_backend_name() != "sqlite":
        return create_engine(url, pool_pre_ping=True, connect_args=_KEEPALIVES)
    engine = create_engine(url, poolclass=NullPool, connect_args={"timeout": BUSY_TIMEOUT_MS / 1000})
    event.listen(engine, "connect", lambda raw, _record: _set_up(raw, read_only=read_only, durable=durable))
    event.listen(engine, "begin", lambda connection: _begin(connection, read_only=read_only))
    return engine


_KEEPALIVES: dict[str, Any] = {
    "connect_timeout": 10,
    "keepalives": 1,
    "keepalives_idle": 10,
    "keepalives_interval": 5,
    "keepalives_count": 3,
}
"""A dead machine's connection is noticed within 25 s, so that its lock passes on."""


def _set_up(raw: sqlite3.Connection, *, read_only: bool, durable: bool) -> None:
    raw.isolation_level = None
    cursor = raw.cursor()
    cursor.execute(f"PRAGMA busy_timeout={BUSY_TIMEOUT_MS}")
    if read_only:
        cursor.execute("PRAGMA query_only=ON")
    else:
        cursor.execute("PRAGMA journal_mode=WAL")
        cursor.execute(f"PRAGMA synchronous={'FULL' if durable else 'NORMAL'}")
        cursor.execute(f"PRAGMA journal_size_limit={WAL_LIMIT_BYTES}")
        cursor.execute("PRAGMA foreign_keys=ON")
    cursor.execute("PRAGMA cache_size=-32000")
    cursor.close()


def _begin(connection: Any, *, read_only: bool) -> None:
    # SQLAlchemy types the event's connection loosely
    connection.exec_driver_sql("BEGIN" if read_only else "BEGIN IMMEDIATE")


def _check_revision(engine: Engine, url: URL) -> None:
    found = stored_revision(engine, url)
    if found is None:
        raise StoreError(f"{shown_url(url)} is not a store of this program; name another file in store.url")
    if found > REVISION:
        raise StoreNewer(
            f"{shown_url(url)} was written by a newer release (schema {found}, this one reads {REVISION}); "
            "it is left untouched: use the newer release"
        )
    if found < REVISION:
        raise StoreError(f"{shown_url(url)} has the older schema {found}; run `runaudit store upgrade`")


def stored_revision(engine: Engine, url: URL) -> str | None:
    """Return the schema's revision, or None where the database holds no store."""
    try:
        with engine.connect() as connection:
            return connection.execute(text("SELECT version_num FROM alembic_version")).scalar()
    except OperationalError as error:
        if url.get_backend_name() == "sqlite":
            _refuse_sqlite(error, url)
            return None
        raise Unavailable(
            f"the store server at {shown_url(url)} does not answer: {_first_line(error)}"
        ) from error
    except DBAPIError as error:
        if "alembic_version" in str(error):
            return None
        raise StoreDamaged(_damaged(url, error)) from error


def _refuse_sqlite(error: OperationalError, url: URL) -> None:
    reason = _first_line(error)
    if "no such table" in reason:
        return
    if "malformed" in reason or "not a database" in reason:
        raise StoreDamaged(_damaged(url, error)) from error
    file = url.database or ""
    hint = (
        "it is read-only here"
        if os.path.exists(file) and not os.access(file, os.W_OK)
        else "check its folder"
    )
    raise StoreError(f"{file} cannot be opened ({reason}); {hint}") from error


def _damaged(url: URL, error: Exception) -> str:
    return (
        f"{shown_url(url)} is damaged ({_first_line(error)}) and left as found: run `runaudit store verify`, "
        "then name a new file in store.url and gather the landed files again"
    )


def _first_line(error: Exception) -> str:
    return str(getattr(error, "orig", error)).splitlines()[0]
