"""Alerts to deliver: written with the warning that raised them, delivered at least once."""

from __future__ import annotations

from datetime import datetime
from typing import Any, Literal

import msgspec
from sqlalchemy import Connection, func, insert, select, update

from auditd.store.clock import from_us
from auditd.store.tables import outbox

State = Literal["due", "delivered", "dead"]


class Letter(msgspec.Struct, frozen=True, kw_only=True):
    """One alert for one target; `alert_id` lets a receiver drop repeats."""

    row: int
    alert_id: str
    caution: int
    target: str
    body: dict[str, Any]  # one warning as `warnings --json` shows it, with campaign and alert_id
    created_at: datetime
    n_tries: int


def put_letter(
    connection: Connection,
    *,
    alert_id: str,
    caution: int,
    target: str,
    body: dict[str, Any],
    created_us: int,
) -> None:
    """Put an alert into the outbox; one of the same id is there already after a replay, and stays."""
    known = connection.execute(select(outbox.c.row).where(outbox.c.alert_id == alert_id)).scalar()
    if known is None:
        connection.execute(
            insert(outbox).values(
                alert_id=alert_id,
                caution=caution,
                target=target,
                body=msgspec.json.encode(body).decode(),
                created_us=created_us,
                due_us=created_us,
            )
        )


def due_letters(connection: Connection, at_us: int) -> list[Letter]:
    """Return the alerts whose time has come, the oldest first."""
    query = (
        select(outbox)
        .where(outbox.c.state == "due", outbox.c.due_us <= at_us)
        .order_by(outbox.c.row)
        .limit(1000)
    )
    return [
        Letter(
            row=row.row,
            alert_id=row.alert_id,
            caution=row.caution,
            target=row.target,
            body=msgspec.json.decode(row.body),
            created_at=from_us(row.created_us),
            n_tries=row.n_tries,
        )
        for row in connection.execute(query)
    ]


def mark_delivered(connection: Connection, rows: list[int], at_us: int) -> None:
    """Store that alerts were delivered."""
    connection.execute(
        update(outbox)
        .where(outbox.c.row.in_(rows))
        .values(state="delivered", delivered_us=at_us, error=None, n_tries=outbox.c.n_tries + 1)
    )


def mark_failed(connection: Connection, rows: list[int], *, error: str, due_us: int, dead: bool) -> None:
    """Store that a delivery failed, and when it is tried again, if it is."""
    connection.execute(
        update(outbox)
        .where(outbox.c.row.in_(rows))
        .values(state="dead" if dead else "due", due_us=due_us, error=error, n_tries=outbox.c.n_tries + 1)
    )


def postpone_letters(connection: Connection, rows: list[int], due_us: int) -> None:
    """Let alerts wait that were not tried, because another one for the same target just failed."""
    connection.execute(update(outbox).where(outbox.c.row.in_(rows)).values(due_us=due_us))


def count_letters(connection: Connection) -> dict[State, int]:
    """Count alerts by state."""
    rows = connection.execute(select(outbox.c.state, func.count()).group_by(outbox.c.state))
    counts = {row[0]: row[1] for row in rows}
    return {
        "due": counts.get("due", 0),
        "delivered": counts.get("delivered", 0),
        "dead": counts.get("dead", 0),
    }


def next_due_us(connection: Connection) -> int | None:
    """Return when the next alert is due."""
    return connection.execute(select(func.min(outbox.c.due_us)).where(outbox.c.state == "due")).scalar()


def last_error(connection: Connection) -> str | None:
    """Return the newest failure of a delivery that still stands."""
    query = select(outbox.c.error).where(outbox.c.error.is_not(None), outbox.c.state != "delivered")
    return connection.execute(query.order_by(outbox.c.row.desc()).limit(1)).scalar()
