"""What the daemon keeps for itself and for queries: checkpoints, computed displays, heartbeat, flushes."""

from __future__ import annotations

from datetime import datetime
from typing import Any

import msgspec
from sqlalchemy import Connection, Table, delete, insert, select

from auditd.store.clock import from_us
from auditd.store.tables import beats, checkpoints, displays, flushes


class Checkpoint(msgspec.Struct, frozen=True, kw_only=True):
    """The audit's state after the run at `position` - 1, within an epoch."""

    epoch: int
    position: int
    body: bytes


class Beat(msgspec.Struct, frozen=True, kw_only=True):
    """A daemon's sign of life."""

    pid: int
    host: str
    at: datetime
    body: dict[str, Any]  # what the daemon says of itself: how it watches, what waits


def save_checkpoint(connection: Connection, name: str, checkpoint: Checkpoint) -> None:
    """Save a state with the runs that it covers."""
    _replace(connection, checkpoints, {"name": name}, msgspec.structs.asdict(checkpoint))


def stored_checkpoint(connection: Connection, name: str) -> Checkpoint | None:
    """Return a saved state."""
    row = connection.execute(select(checkpoints).where(checkpoints.c.name == name)).first()
    return None if row is None else Checkpoint(epoch=row.epoch, position=row.position, body=row.body)


def save_display(connection: Connection, name: str, shown_us: int, body: Any) -> None:
    """Save what a query will show."""
    text = msgspec.json.encode(body).decode()
    _replace(connection, displays, {"name": name}, {"shown_us": shown_us, "body": text})


def stored_display(connection: Connection, name: str) -> Any:
    """Return what was saved to be shown, or None."""
    body = connection.execute(select(displays.c.body).where(displays.c.name == name)).scalar()
    return None if body is None else msgspec.json.decode(body)


def save_beat(connection: Connection, role: str, *, pid: int, host: str, at_us: int, body: Any) -> None:
    """Save a sign of life."""
    values = {"pid": pid, "host": host, "beat_us": at_us, "body": msgspec.json.encode(body).decode()}
    _replace(connection, beats, {"role": role}, values)


def stored_beats(connection: Connection) -> dict[str, Beat]:
    """Return the last sign of life of each role: `auditor`, or a collector's `collector@host`."""
    return {
        row.role: Beat(
            pid=row.pid, host=row.host, at=from_us(row.beat_us), body=msgspec.json.decode(row.body)
        )
        for row in connection.execute(select(beats))
    }


def save_flush(connection: Connection, *, at_us: int, position: int, n_runs: int, reason: str) -> None:
    """Record that waiting runs were let in without waiting longer."""
    connection.execute(
        insert(flushes).values(flushed_us=at_us, position=position, n_runs=n_runs, reason=reason)
    )


def stored_flushes(connection: Connection) -> list[tuple[datetime, int, int, str]]:
    """Return the flushes as (time, first position, runs let in, reason)."""
    return [
        (from_us(row.flushed_us), row.position, row.n_runs, row.reason)
        for row in connection.execute(select(flushes).order_by(flushes.c.row))
    ]


def _replace(connection: Connection, table: Table, key: dict[str, Any], values: dict[str, Any]) -> None:
    for name, value in key.items():
        connection.execute(delete(table).where(table.c[name] == value))
    connection.execute(insert(table).values(**key, **values))
