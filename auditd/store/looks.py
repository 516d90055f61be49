"""Looks: every time that somebody compared, with what was seen."""

from __future__ import annotations

from datetime import datetime
from typing import Any

import msgspec
from sqlalchemy import Connection, func, insert, select

from auditd.store.clock import from_us
from auditd.store.tables import looks


class Look(msgspec.Struct, frozen=True, kw_only=True):
    """One look at the comparisons."""

    at: datetime
    command: str
    n_runs: int
    body: Any  # the JSON document that was shown


def save_look(connection: Connection, *, looked_us: int, command: str, n_runs: int, body: Any) -> int:
    """Append a look and return how many there have been."""
    connection.execute(
        insert(looks).values(
            looked_us=looked_us, command=command, n_runs=n_runs, body=msgspec.json.encode(body).decode()
        )
    )
    return count_looks(connection)


def count_looks(connection: Connection) -> int:
    """Count looks."""
    return connection.execute(select(func.count()).select_from(looks)).scalar_one()


def stored_looks(connection: Connection) -> list[Look]:
    """Return the looks, the oldest first."""
    return [
        Look(
            at=from_us(row.looked_us),
            command=row.command,
            n_runs=row.n_runs,
            body=msgspec.json.decode(row.body),
        )
        for row in connection.execute(select(looks).order_by(looks.c.row))
    ]
