"""A backup of the store while others write to it: whole, checked, and never over another file."""

from __future__ import annotations

import errno
import os
import sqlite3
from pathlib import Path

from sqlalchemy.engine import URL

from auditd.errors import CannotCreate, StoreDamaged, StoreError
from auditd.store.copying import copy_database, integrity_complaints, sync_folder
from auditd.store.engine import open_engine, shown_url

_NO_LINKS = frozenset({errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS, errno.EMLINK})


def backup_store(url: URL, target: Path) -> None:
    """Copy the store as it is at one moment to `target`, make the copy last, and check it.

    Raises
    ------
    CannotCreate
        The target exists, or cannot be written.
    StoreError
        There is no store, or it is on a server, whose own tools make backups.
    StoreDamaged
        The copy does not check, hence neither does the store; no backup is left.
    """
    if url.get_backend_name() != "sqlite":
        raise StoreError(
            f"the store is on a server: back it up with `pg_dump --format=custom --dbname={shown_url(url)}`, "
            "which is consistent while collectors write"
        )
    open_engine(url, read_only=True).dispose()
    if os.path.lexists(target):
        raise CannotCreate(f"{target} exists and is not overwritten; name a new file")
    draft = target.with_name(f".{target.name}.{os.getpid()}.backing-up")
    try:
        copy_database(Path(url.database or ""), draft)
        complaints = integrity_complaints(draft)
        if complaints:
            raise StoreDamaged(f"the backup does not check ({complaints[0]}); run `runaudit store verify`")
        _place(draft, target)
    except (OSError, sqlite3.Error) as error:
        raise CannotCreate(f"the backup {target} cannot be written: {error}") from error
    finally:
        for end in ("", "-wal", "-shm", "-journal"):
            Path(f"{draft}{end}").unlink(missing_ok=True)


def _place(draft: Path, target: Path) -> None:
    """Give the finished backup its name; a link fails where the name has been taken meanwhile."""
    try:
        os.link(draft, target)
    except FileExistsError as error:
        raise CannotCreate(f"{target} exists and is not overwritten; name a new file") from error
    except OSError as error:
        if error.errno not in _NO_LINKS or os.path.lexists(target):
            raise
        os.rename(draft, target)
    sync_folder(target.parent)
