"""How far each file has been read; saved in the transaction that takes its runs."""

from __future__ import annotations

import os
import socket
from collections.abc import Iterator, Sequence

import msgspec
from sqlalchemy import Connection, bindparam, delete, insert, select
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
    save_sources(connection, [source], machine)


def save_sources(connection: Connection, found: Sequence[Source], machine: str = "") -> None:
    """Save how far files have been read, in place of what was known before; of one file the last counts."""
    latest = {source.path: source for source in found}
    if not latest:
        return
    known = (sources.c.machine == machine) & (sources.c.path == bindparam("known_path"))
    connection.execute(delete(sources).where(known), [{"known_path": path} for path in latest])
    rows = [{"machine": machine, **msgspec.structs.asdict(source)} for source in latest.values()]
    connection.execute(insert(sources), rows)


def stored_sources(connection: Connection, machine: str = "") -> Iterator[Source]:
    """Yield what is known of each file of one machine's landing."""
    columns = [column for column in sources.c if column.name not in {"row", "machine"}]
    for row in connection.execute(select(*columns).where(sources.c.machine == machine)).mappings():
        yield Source(**row)
