"""How far each file has been read; saved in the transaction that takes its runs."""

from __future__ import annotations

import os
import socket
from collections.abc import Iterator

import msgspec
from sqlalchemy import Connection, delete, insert, select
from sqlalchemy.engine import URL

from auditd.records import Source
from auditd.store.tables import sources


def machine_name() -> str:
    """Return this machine's name; `RUNAUDIT_MACHINE` states another, such as a container's for good."""
    return os.environ.get("RUNAUDIT_MACHINE") or socket.gethostname()


def machine_of_sources(url: URL) -> str:
    """Return under whose name files are kept: a server's store holds those of many machines."""
    return machine_name() if url.get_backend_name() == "postgresql" else ""


def save_source(connection: Connection, source: Source, machine: str = "") -> None:
    """Save how far a file has been read, in place of what was known before."""
    known = (sources.c.machine == machine) & (sources.c.path == source.path)
    connection.execute(delete(sources).where(known))
    connection.execute(insert(sources).values(machine=machine, **msgspec.structs.asdict(source)))


def stored_sources(connection: Connection, machine: str = "") -> Iterator[Source]:
    """Yield what is known of each file of one machine's landing."""
    columns = [column for column in sources.c if column.name not in {"row", "machine"}]
    for row in connection.execute(select(*columns).where(sources.c.machine == machine)).mappings():
        yield Source(**row)
