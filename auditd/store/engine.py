"""Connections to the store: one that writes, short ones that append, and ones that read."""

from __future__ import annotations

import os
import socket
from importlib.util import find_spec
from pathlib import Path
from typing import Any

from sqlalchemy import Engine, create_engine, event, text
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError, OperationalError
from sqlalchemy.pool import NullPool

from auditd.errors import StoreError, StoreNewer, Unavailable
from auditd.store.sqlite_file import connect_file, file_revision, may_write
from auditd.store.tables import REVISION

_UNDEFINED_TABLE = "42P01"
"""PostgreSQL's code for a table that is not there (PostgreSQL manual, appendix A)."""


def open_engine(url: URL, *, read_only: bool = False, durable: bool = True) -> Engine:
    """Return an engine on an existing store.

    `durable` keeps every commit through a power cut (synchronous=FULL). A store of another revision is
    refused without being touched.

    Raises
    ------
    StoreError
        There is no store yet, or it is of another revision (`StoreNewer`) or damaged (`StoreDamaged`), or
        may not be written to where it has to be.
    Unavailable
        A store server does not answer.
    """
    if url.get_backend_name() == "sqlite":
        _check_file(Path(url.database or ""), read_only=read_only)
    engine = connect_engine(url, read_only=read_only, durable=durable)
    try:
        _check_revision(stored_revision(engine, url), url)
    except BaseException:
        engine.dispose()
        raise
    return engine


def shown_url(url: URL) -> str:
    """Return the store's address without a password, for messages."""
    return url.database or "" if url.get_backend_name() == "sqlite" else url.render_as_string()


def connect_engine(url: URL, *, read_only: bool, durable: bool) -> Engine:
    """Return an engine without asking what the database holds; a SQLite file must exist."""
    if url.get_backend_name() != "sqlite":
        return _connect_server(url)
    file = Path(url.database or "")
    engine = create_engine(
        url,
        poolclass=NullPool,
        creator=lambda: connect_file(file, read_only=read_only, durable=durable),
    )
    event.listen(engine, "begin", lambda connection: _begin(connection, read_only=read_only))
    return engine


_KEEPALIVES: dict[str, Any] = {
    "connect_timeout": 10,
    "keepalives": 1,
    "keepalives_idle": 10,
    "keepalives_interval": 5,
    "keepalives_count": 3,
    "tcp_user_timeout": 25_000,
}
_ASKED_OF_SERVER = (
    "-c tcp_keepalives_idle=10 -c tcp_keepalives_interval=5 -c tcp_keepalives_count=3 "
    "-c tcp_user_timeout=25000"
)
"""A dead server is noticed within 25 s, and, since the server is asked for the same, a dead machine of ours:
by default it would hold the auditor's lock for two hours (PostgreSQL manual, 20.3.2)."""


def _connect_server(url: URL) -> Engine:
    if find_spec("psycopg") is None:
        raise StoreError(f"{shown_url(url)} needs PostgreSQL's driver; install auditd[postgres]")
    stated = url.query.get("options", "")
    asked = {
        "application_name": f"runaudit {os.getpid()} on {socket.gethostname()}"[:63],
        "options": f"{stated if isinstance(stated, str) else ' '.join(stated)} {_ASKED_OF_SERVER}".strip(),
    }
    return create_engine(url, pool_pre_ping=True, connect_args=_KEEPALIVES | asked)


def _begin(connection: Any, *, read_only: bool) -> None:
    # SQLAlchemy types the event's connection loosely
    connection.exec_driver_sql("BEGIN" if read_only else "BEGIN IMMEDIATE")


def _check_file(file: Path, *, read_only: bool) -> None:
    if not file.is_file():
        raise StoreError(f"no store at {file}; run `runaudit gather` or `runaudit watch` first")
    if not read_only and not may_write(file):
        raise StoreError(
            f"the store {file} is read-only here; make the file and its folder writable for this user, "
            "or name another file in store.url"
        )


def _check_revision(found: str | None, url: URL) -> None:
    if found is None:
        raise StoreError(f"{shown_url(url)} is not a store of this program; name another file in store.url")
    refuse_newer(found, url)
    if found != REVISION:
        raise StoreError(f"{shown_url(url)} has the older schema {found}; run `runaudit store upgrade`")


def refuse_newer(found: str | None, url: URL) -> None:
    """Raise `StoreNewer` where a store's revision is beyond this release."""
    if found is not None and int(found) > int(REVISION):
        raise StoreNewer(
            f"{shown_url(url)} was written by a newer release (schema {found}, this one reads {REVISION}); "
            "it is left untouched: use the newer release"
        )


def stored_revision(engine: Engine, url: URL) -> str | None:
    """Return the schema's revision, or None where the database is empty; nothing is touched."""
    if url.get_backend_name() == "sqlite":
        return file_revision(Path(url.database or ""))
    try:
        with engine.connect() as connection:
            found = connection.execute(text("SELECT version_num FROM alembic_version")).scalar()
    except OperationalError as error:
        raise Unavailable(
            f"the store server at {shown_url(url)} does not answer: {_first_line(error)}"
        ) from error
    except DBAPIError as error:
        if getattr(error.orig, "sqlstate", None) == _UNDEFINED_TABLE:
            return None
        raise StoreError(f"the store at {shown_url(url)} cannot be read: {_first_line(error)}") from error
    if found is not None and not str(found).isdigit():
        raise StoreError(f"{shown_url(url)} holds the tables of another program; name another database")
    return found


def _first_line(error: Exception) -> str:
    return str(getattr(error, "orig", error)).splitlines()[0]
