"""The operator's answers: appended, applied from a stored position on, kept for ever."""

from __future__ import annotations

from datetime import datetime
from typing import Any, Literal

import msgspec
from sqlalchemy import Connection, insert, select, update

from auditd.store.clock import from_us
from auditd.store.tables import answers

Action = Literal["noted", "set-aside", "restart", "absorb"]


class Answer(msgspec.Struct, frozen=True, kw_only=True):
    """A reply to a warning. `scope` holds a nuisance's level (`host`: `n3`), `from` and `to` where stated.

    `from_position` is the position from which the answer applies; None until the auditor has read it.
    """

    row: int
    caution: int
    answered_at: datetime
    reason: str
    action: Action
    scope: dict[str, str]
    from_position: int | None


def save_answer(
    connection: Connection,
    *,
    caution: int,
    answered_us: int,
    reason: str,
    action: Action,
    scope: dict[str, str],
) -> None:
    """Append an answer."""
    connection.execute(
        insert(answers).values(
            caution=caution,
            answered_us=answered_us,
            reason=reason,
            action=action,
            scope=msgspec.json.encode(scope).decode(),
        )
    )


def stored_answers(connection: Connection, *conditions: Any) -> list[Answer]:
    """Return answers, the oldest first."""
    query = select(answers).where(*conditions).order_by(answers.c.row)
    return [
        Answer(
            row=row.row,
            caution=row.caution,
            answered_at=from_us(row.answered_us),
            reason=row.reason,
            action=row.action,
            scope=msgspec.json.decode(row.scope, type=dict[str, str]),
            from_position=row.from_position,
        )
        for row in connection.execute(query)
    ]


def apply_from(connection: Connection, row: int, position: int) -> None:
    """Store from which position an answer applies."""
    connection.execute(update(answers).where(answers.c.row == row).values(from_position=position))
