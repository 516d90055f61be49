"""One holder takes runs: a lock file beside a SQLite store, an advisory lock on PostgreSQL."""

from __future__ import annotations

import errno
import fcntl
import os
import socket
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Self

from sqlalchemy import Connection, Engine, PoolProxiedConnection
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError, OperationalError

from auditd.errors import CannotCreate, StoreHeld, Unavailable
from auditd.store.engine import shown_url

AUDITOR_LOCK = 0x72756E61
"""Key of the advisory lock that the one auditor of a PostgreSQL store holds."""

_HOLDER = (
    "SELECT application_name FROM pg_stat_activity JOIN pg_locks USING (pid) WHERE locktype = 'advisory' "
    "AND granted AND classid = 0 AND objid = %(key)s "
    "AND pg_locks.database = (SELECT oid FROM pg_database WHERE datname = current_database())"
)


class Holder:
    """The right to take runs, held until it is closed or the process ends, however it ends.

    Raises `StoreHeld` on entering when another process has it, `Unavailable` when a server does not answer.
    """

    def __init__(self, url: URL, engine: Engine | None = None) -> None:
        self._url = url
        self._engine = engine
        self._handle: int | None = None
        self._connection: Connection | None = None
        self._open: PoolProxiedConnection | None = None

    def __enter__(self) -> Self:
        if self._url.get_backend_name() == "sqlite":
            self._lock_file(Path(f"{os.path.realpath(self._url.database or '')}.lock"))
            self._keep_open()
        else:
            self._lock_server()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.release()

    def release(self) -> None:
        """Give the right back."""
        if self._open is not None:
            self._open.close()
            self._open = None
        if self._handle is not None:
            os.close(self._handle)
            self._handle = None
        if self._connection is not None:
            with suppress(DBAPIError):
                self._connection.close()
            self._connection = None

    def holds(self) -> bool:
        """Whether the right is still ours; a server's lock goes with its connection."""
        if self._connection is None:
            return self._handle is not None
        try:
            self._connection.exec_driver_sql("SELECT 1")
            self._connection.commit()
        except DBAPIError:
            self.release()
            return False
        return True

    def take_again(self) -> None:
        """Take the right anew after it was lost with a server's connection; raises as on entering."""
        if not self.holds():
            self.__enter__()

    def _lock_file(self, file: Path) -> None:
        try:
            handle = os.open(file, os.O_CREAT | os.O_RDWR | os.O_CLOEXEC, 0o644)
        except OSError as error:
            raise CannotCreate(f"the lock {file} cannot be made: {error.strerror}") from error
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            holder = os.read(handle, 200).decode(errors="replace").strip() or "another process"
            os.close(handle)
            if error.errno in {errno.EWOULDBLOCK, errno.EACCES}:
                raise StoreHeld(
                    f"{self._url.database} is held by {holder}; stop it first, or ask `runaudit status`"
                ) from error
            raise CannotCreate(f"the lock {file} cannot be taken: {error.strerror}") from error
        os.ftruncate(handle, 0)
        os.pwrite(handle, f"process {os.getpid()} on {socket.gethostname()}\n".encode(), 0)
        self._handle = handle

    def _keep_open(self) -> None:
        """Keep the log between transactions: the last connection to close folds it in and removes it."""
        if self._engine is None:
            return
        try:
            self._open = self._engine.raw_connection()
            self._open.cursor().execute("SELECT count(*) FROM sqlite_master").fetchone()
        except BaseException:
            self.release()
            raise

    def _lock_server(self) -> None:
        if self._engine is None:
            raise StoreHeld("a server's lock needs an engine; this is a mistake in the program")
        try:
            connection = self._engine.connect()
        except OperationalError as error:
            raise Unavailable(f"the store server at {shown_url(self._url)} does not answer") from error
        # the lock lives as long as the connection, which must not go back to the pool with it
        connection.detach()
        taken = connection.exec_driver_sql(f"SELECT pg_try_advisory_lock({AUDITOR_LOCK})").scalar()
        connection.commit()
        if not taken:
            holder = connection.exec_driver_sql(_HOLDER, {"key": AUDITOR_LOCK}).scalar() or "another auditor"
            connection.close()
            raise StoreHeld(
                f"{shown_url(self._url)} is held by {holder}; stop it first, or ask `runaudit status`"
            )
        self._connection = connection
