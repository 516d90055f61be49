"""One holder takes runs: a lock file beside a SQLite store, an advisory lock on PostgreSQL."""

from __future__ import annotations

import errno
import fcntl
import os
import socket
from pathlib import Path
from types import TracebackType
from typing import Self

from sqlalchemy import Connection, Engine
from sqlalchemy.engine import URL

from auditd.errors import CannotCreate, StoreHeld

AUDITOR_LOCK = 0x72756E61
"""Key of the advisory lock that the one auditor of a PostgreSQL store holds."""


class Holder:
    """The right to take runs, held until it is closed or the process ends, however it ends.

    Raises `StoreHeld` on entering when another process has it.
    """

    def __init__(self, url: URL, engine: Engine | None = None) -> None:
        self._url = url
        self._engine = engine
        self._handle: int | None = None
        self._connection: Connection | None = None

    def __enter__(self) -> Self:
        if self._url.get_backend_name() == "sqlite":
            self._lock_file(Path(f"{self._url.database}.lock"))
        else:
            self._lock_server()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.release()

    def release(self) -> None:
        """Give the right back."""
        if self._handle is not None:
            os.close(self._handle)
            self._handle = None
        if self._connection is not None:
            self._connection.close()
            self._connection = None

    def holds(self) -> bool:
        """Whether the right is still ours; a server's lock goes with its connection."""
        if self._connection is None:
            return self._handle is not None
        self._connection.exec_driver_sql("SELECT 1")
        self._connection.commit()
        return True

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

    def _lock_server(self) -> None:
        if self._engine is None:
            raise StoreHeld("a server's lock needs an engine; this is a mistake in the program")
        connection = self._engine.connect()
        taken = connection.exec_driver_sql(f"SELECT pg_try_advisory_lock({AUDITOR_LOCK})").scalar()
        connection.commit()
        if not taken:
            connection.close()
            raise StoreHeld("another auditor holds this store; it takes over by itself when that one ends")
        self._connection = connection
