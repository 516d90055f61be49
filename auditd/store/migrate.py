"""Making a store, and bringing an older one to this release's schema.

Alembic's DDL is not transactional on SQLite, so an existing file is copied, the copy is migrated and
checked, and then put in place; the old file stays beside it as a backup. On PostgreSQL the whole migration is
one transaction.
"""

from __future__ import annotations

import fcntl
import os
import shutil
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager, suppress
from pathlib import Path

from sqlalchemy import Engine
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError, OperationalError

from auditd.bundled import bundled_folder
from auditd.errors import CannotCreate, StoreDamaged, StoreError, StoreHeld, Unavailable
from auditd.store.copying import copy_database, integrity_complaints, page_complaint, sync_folder
from auditd.store.engine import connect_engine, open_engine, refuse_newer, shown_url, stored_revision
from auditd.store.lock import Holder
from auditd.store.sqlite_file import BUSY_TIMEOUT_MS, connect_file, file_revision
from auditd.store.tables import REVISION

MIGRATION_LOCK = 0x61756469
"""Key of the advisory lock under which a PostgreSQL store is migrated."""


def open_or_make(url: URL) -> Engine:
    """Return an engine on the store, made or migrated first where needed.

    Raises
    ------
    StoreError
        The store is newer, damaged, read-only, or older and held by a running daemon.
    CannotCreate, Unavailable
    """
    upgrade_store(url)
    engine = open_engine(url)
    if url.get_backend_name() == "sqlite":
        refuse_damaged(Path(url.database or ""))
    return engine


def upgrade_store(url: URL) -> str | None:
    """Make the store or bring it to this release's schema; return the backup's path if one was made."""
    if url.get_backend_name() == "sqlite":
        return _upgrade_file(Path(os.path.realpath(url.database or "")))
    _upgrade_server(url)
    return None


def _upgrade_file(file: Path) -> str | None:
    try:
        file.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CannotCreate(f"the store's folder {file.parent} cannot be made: {error.strerror}") from error
    if _is_current(file):
        return None
    with _making_lock(file):
        if _is_current(file):
            return None
        try:
            if file.exists() and file.stat().st_size > 0:
                return _migrate_copy(file)
            _make_new(file)
        except (sqlite3.Error, DBAPIError, OSError) as error:
            reason = str(getattr(error, "orig", error)).splitlines()[0]
            raise CannotCreate(f"the store {file} cannot be made ready: {reason}; it is as it was") from error
    return None


def _is_current(file: Path) -> bool:
    """Whether a file needs nothing; one that is newer, damaged or foreign is refused untouched."""
    if not file.exists() or file.stat().st_size == 0:
        return False
    found = file_revision(file)
    refuse_newer(found, URL.create("sqlite", database=str(file)))
    return found == REVISION


def _make_new(file: Path) -> None:
    draft = _fresh_draft(file)
    draft.touch()
    _migrate_draft(draft)
    os.replace(draft, file)
    sync_folder(file.parent)


def _migrate_copy(file: Path) -> str:
    """Migrate a copy of a store that nobody holds; a kill at any moment leaves the old or the new one."""
    with Holder(URL.create("sqlite", database=str(file))):
        refuse_damaged(file)
        draft, backup = _fresh_draft(file), _fresh_backup(file)
        copy_database(file, backup)
        copy_database(file, draft)
        _migrate_draft(draft)
        _end_log(file)
        for made in (draft, backup):
            _like(file, made)
        kept = _kept_name(file)
        os.replace(backup, kept)
        os.replace(draft, file)
        sync_folder(file.parent)
        return str(kept)


def refuse_damaged(file: Path) -> None:
    """Raise `StoreDamaged` where a file's pages do not check; it is left as found."""
    complaint = page_complaint(file)
    if complaint is not None:
        raise StoreDamaged(
            f"{file} is damaged ({complaint}) and left as found: run `runaudit store verify`, "
            "then name a new file in store.url and gather the landed files again"
        )


def _fresh_draft(file: Path) -> Path:
    return _without_leftovers(file.with_name(f".{file.name}.migrating"))


def _fresh_backup(file: Path) -> Path:
    return _without_leftovers(file.with_name(f".{file.name}.backing-up"))


def _without_leftovers(made: Path) -> Path:
    """Remove what a killed migration left under a name that is ours."""
    for end in ("", "-wal", "-shm", "-journal"):
        Path(f"{made}{end}").unlink(missing_ok=True)
    return made


def _kept_name(file: Path) -> Path:
    """Return a name for the backup that no earlier backup has."""
    name, number = file.with_name(f"{file.name}.before-{REVISION}"), 1
    while name.exists():
        number += 1
        name = file.with_name(f"{file.name}.before-{REVISION}.{number}")
    return name


def _migrate_draft(draft: Path) -> None:
    """Bring the draft to the head, check it, and fold its log into it: one rename then places the whole."""
    engine = connect_engine(URL.create("sqlite", database=str(draft)), read_only=False, durable=True)
    _run_alembic(engine)
    engine.dispose()
    complaints = integrity_complaints(draft)
    if complaints:
        raise StoreDamaged(f"the migrated copy does not check: {complaints[0]}; the store is as it was")
    _fold_log(draft)


def _fold_log(draft: Path) -> None:
    """Fold the draft's log into it; the file itself says that it wants a log, from its first reader on."""
    with closing(connect_file(draft, read_only=False)) as connection:
        connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    if Path(f"{draft}-wal").exists():
        raise StoreHeld(f"{draft} is being read by another process; end it and try again")


def _end_log(file: Path) -> None:
    """Fold the old file's log into it and remove it: it would be played into the file that takes its place.

    Raises
    ------
    StoreHeld
        Another process has the file open.
    """
    with closing(sqlite3.connect(file, timeout=BUSY_TIMEOUT_MS / 1000, isolation_level=None)) as connection:
        try:
            mode = connection.execute("PRAGMA journal_mode=DELETE").fetchone()[0]
        except sqlite3.OperationalError as error:
            raise StoreHeld(f"{file} is being read by another process; end it and try again") from error
    if mode != "delete" or Path(f"{file}-wal").exists():
        raise StoreHeld(f"{file} is being read by another process; end it and try again")


def _like(file: Path, made: Path) -> None:
    """Give what was made the rights, and where we may the owner, of the old file."""
    shutil.copymode(file, made)
    found = file.stat()
    with suppress(PermissionError):
        os.chown(made, found.st_uid, found.st_gid)


def _upgrade_server(url: URL) -> None:
    engine = connect_engine(url, read_only=False, durable=True)
    try:
        with engine.connect() as connection:
            connection.exec_driver_sql(f"SELECT pg_advisory_lock({MIGRATION_LOCK})")
            connection.commit()
            # the lock goes with the connection, which does not return to the pool
            connection.detach()
            found = stored_revision(engine, url)
            refuse_newer(found, url)
            if found != REVISION:
                _run_alembic(engine)
    except OperationalError as error:
        raise Unavailable(f"the store server at {shown_url(url)} does not answer: {error.orig}") from error
    except DBAPIError as error:
        raise StoreError(f"the store at {shown_url(url)} cannot be migrated: {error.orig}") from error
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
def _making_lock(file: Path) -> Iterator[None]:
    """Hold the lock under which one starter at a time makes or migrates the file."""
    lock = file.with_name(f".{file.name}.making")
    try:
        handle = os.open(lock, os.O_CREAT | os.O_RDWR | os.O_CLOEXEC, 0o600)
    except OSError as error:
        raise CannotCreate(f"the store's folder {file.parent} cannot be written: {error.strerror}") from error
    try:
        fcntl.flock(handle, fcntl.LOCK_EX)
        yield
    finally:
        os.close(handle)
