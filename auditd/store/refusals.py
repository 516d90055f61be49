"""Refusals as kept: each once, with path, offset and reason."""

from __future__ import annotations

from collections.abc import Iterable
from datetime import datetime
from typing import Any

import msgspec
from sqlalchemy import Connection, func, select, update

from auditd.records import Refusal
from auditd.store.clock import from_us
from auditd.store.tables import refusals


class StoredRefusal(msgspec.Struct, frozen=True, kw_only=True):
    """A refusal and when it was made."""

    refusal: Refusal
    at: datetime


def save_refusals(
    connection: Connection, found: Iterable[Refusal], refused_us: int, *, taken_up: bool
) -> list[Refusal]:
    """Save refusals and return those that are new; one that was made before is not made again."""
    new: list[Refusal] = []
    for refusal in found:
        values = {
            "path": refusal.path,
            "offset": refusal.offset,
            "number": refusal.number,
            "kind": refusal.kind,
            "reason": refusal.reason,
            "run_id": refusal.id,
            "refused_us": refused_us,
            "taken_up": taken_up,
        }
        if _insert_once(connection, values):
            new.append(refusal)
    return new


def _insert_once(connection: Connection, values: dict[str, Any]) -> bool:
    """Insert a refusal unless it is there, and return whether it is new."""
    if connection.dialect.name == "postgresql":
        from sqlalchemy.dialects import postgresql

        # the driver counts no rows here, hence the returned one
        once = postgresql.insert(refusals).values(values).on_conflict_do_nothing().returning(refusals.c.row)
        return connection.execute(once).first() is not None
    from sqlalchemy.dialects import sqlite

    return connection.execute(sqlite.insert(refusals).values(values).on_conflict_do_nothing()).rowcount > 0


def take_up_refusals(connection: Connection) -> list[Refusal]:
    """Return refusals that collectors made and no auditor has seen, and mark them as seen."""
    new = list(connection.execute(select(refusals).where(~refusals.c.taken_up).order_by(refusals.c.row)))
    if new:
        last = max(row.row for row in new)
        connection.execute(
            update(refusals).where(~refusals.c.taken_up, refusals.c.row <= last).values(taken_up=True)
        )
    return [_refusal(row) for row in new]


def stored_refusals(
    connection: Connection, limit: int | None = None, *, oldest_first: bool = False
) -> list[StoredRefusal]:
    """Return refusals that an auditor has seen or not, the newest first unless said otherwise."""
    row = refusals.c.row
    query = select(refusals).order_by(row if oldest_first else row.desc()).limit(limit)
    return [
        StoredRefusal(refusal=_refusal(row), at=from_us(row.refused_us)) for row in connection.execute(query)
    ]


def count_refusals(connection: Connection) -> int:
    """Count refusals."""
    return connection.execute(select(func.count()).select_from(refusals)).scalar_one()


def _refusal(row: Any) -> Refusal:  # a row's columns are known at run time only
    return Refusal(
        path=row.path,
        offset=row.offset,
        number=row.number,
        kind=row.kind,
        reason=row.reason,
        id=row.run_id,
    )
