"""Making a store, and bringing an older one to this release's schema.

Alembic's DDL is not transactional on SQLite, so an existing file is copied, the copy is migrated and
checked, and then put in place; the old file stays beside it as a backup.
"""

from __future__ import annotations

import fcntl
import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sqlalchemy import Engine
from sqlalchemy.engine import URL
from sqlalchemy.exc import OperationalError

from auditd.bundled import bundled_folder
from auditd.errors import CannotCreate, StoreDamaged, StoreNewer, Unavailable
from auditd.store.engine import connect_engine, open_engine, shown_url, stored_revision
from auditd.store.tables import REVISION

MIGRATION_LOCK = 0x61756469
"""Key of the advisory lock under which a PostgreSQL store is migrated."""


def open_or_make(url: URL) -> Engine:
    """Return an engine on the store, made or migrated first where needed.

    Raises
    ------
    StoreNewer, StoreDamaged, CannotCreate, Unavailable
    """
    upgrade_store(url)
    return open_engine(url)


def upgrade_store(url: URL) -> str | None:
    """Make the store or bring it to this release's schema; return the backup's path if one was made."""
    if url.get_backend_name() == "sqlite":
        return _upgrade_file(Path(url.database or ""))
    _upgrade_server(url)
    return None


def _upgrade_file(file: Path) -> str | None:
    try:
        file.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CannotCreate(f"the store's folder {file.parent} cannot be made: {error}") from error
    if _current(file):
        return None
    with _file_lock(file):
        if _current(file):
            return None
        return _migrate_copy(file)


def _current(file: Path) -> bool:
    if not file.exists() or file.stat().st_size == 0:
        return False
    url = URL.create("sqlite", database=str(file))
    found = stored_revision(connect_engine(url, read_only=True, durable=True), url)
    if found is not None and found > REVISION:
        open_engine(url)
    return found == REVISION


def _migrate_copy(file: Path) -> str | None:
    draft = file.with_name(f".{file.name}.migrating")
    for leftover in (draft, *(Path(f"{draft}{end}") for end in ("-wal", "-shm", "-journal"))):
        leftover.unlink(missing_ok=True)
    backup = None
    had_content = file.exists() and file.stat().st_size > 0
    if had_content:
        backup = f"{file}.before-{REVISION}"
        copy_database(file, Path(backup))
        copy_database(file, draft)
    url = URL.create("sqlite", database=str(draft))
    engine = connect_engine(url, read_only=False, durable=True)
    _run_alembic(engine)
    _settle_draft(draft)
    os.replace(draft, file)
    _sync_folder(file.parent)
    return backup


def _settle_draft(draft: Path) -> None:
    """Check the draft and fold its log into the file, so that one rename puts the whole in place."""
    connection = sqlite3.connect(draft)
    try:
        answer = connection.execute("PRAGMA integrity_check").fetchone()[0]
        if answer != "ok":
            raise StoreDamaged(f"the migrated copy {draft} does not check: {answer}; the store is as it was")
        connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
        connection.execute("PRAGMA journal_mode=DELETE")
    finally:
        connection.close()


def copy_database(source: Path, target: Path) -> None:
    """Copy a SQLite database whole, also while another process writes to it."""
    reading = sqlite3.connect(f"file:{_quoted(source)}?mode=ro", uri=True)
    try:
        writing = sqlite3.connect(target)
        try:
            reading.backup(writing, pages=4096)
        finally:
            writing.close()
    finally:
        reading.close()


def _quoted(path: Path) -> str:
    return str(path).replace("%", "%25").replace("?", "%3f").replace("#", "%23")


def _upgrade_server(url: URL) -> None:
    engine = connect_engine(url, read_only=False, durable=True)
    try:
        with engine.connect() as connection:
            connection.exec_driver_sql(f"SELECT pg_advisory_lock({MIGRATION_LOCK})")
            try:
                found = stored_revision(engine, url)
                if found is not None and found > REVISION:
                    raise StoreNewer(f"{shown_url(url)} has the newer schema {found}; it is left untouched")
                if found != REVISION:
                    _run_alembic(engine)
            finally:
                connection.exec_driver_sql(f"SELECT pg_advisory_unlock({MIGRATION_LOCK})")
    except OperationalError as error:
        raise Unavailable(f"the store server at {shown_url(url)} does not answer: {error.orig}") from error
    finally:
        engine.dispose()


def _run_alembic(engine: Engine) -> None:
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(bundled_folder("migrations")).replace("%", "%%"))
    with engine.begin() as connection:
        config.attributes["connection"] = connection
        command.upgrade(config, "head")


@contextmanager
def _file_lock(file: Path) -> Iterator[None]:
    """Hold the lock under which one starter at a time makes or migrates the file."""
    handle = os.open(file.with_name(f".{file.name}.making"), os.O_CREAT | os.O_RDWR | os.O_CLOEXEC, 0o600)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX)
        yield
    finally:
        os.close(handle)


def _sync_folder(folder: Path) -> None:
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
