"""Plan versions and epochs: what was audited under which plan, from which position on."""

from __future__ import annotations

from datetime import datetime
from typing import Any

import msgspec
from sqlalchemy import Connection, insert, select

from auditd.store.clock import from_us
from auditd.store.tables import epochs, plans


class PlanVersion(msgspec.Struct, frozen=True, kw_only=True):
    """A plan as it was taken into use."""

    version: int
    hash: str
    text: str
    reason: str | None
    taken_at: datetime
    from_position: int


class Epoch(msgspec.Struct, frozen=True, kw_only=True):
    """A stretch of the campaign with a budget of its own.

    `scope` names what starts afresh: empty for everything, or one level of one nuisance.
    """

    epoch: int
    opened_at: datetime
    from_position: int
    plan_version: int
    key: bytes
    reason: str
    scope: dict[str, str]


def plan_versions(connection: Connection) -> list[PlanVersion]:
    """Return the plan's versions, the oldest first."""
    return [
        PlanVersion(
            version=row.version,
            hash=row.hash,
            text=row.text,
            reason=row.reason,
            taken_at=from_us(row.taken_us),
            from_position=row.from_position,
        )
        for row in connection.execute(select(plans).order_by(plans.c.version))
    ]


def latest_version(connection: Connection) -> tuple[int, str] | None:
    """Return number and hash of the plan in use, without its text; None before the first."""
    row = connection.execute(
        select(plans.c.version, plans.c.hash).order_by(plans.c.version.desc()).limit(1)
    ).first()
    return None if row is None else (row.version, row.hash)


def save_plan_version(
    connection: Connection, *, digest: str, text: str, reason: str | None, taken_us: int, from_position: int
) -> int:
    """Append a version of the plan and return its number, counted from 1."""
    version = len(plan_versions(connection)) + 1
    connection.execute(
        insert(plans).values(
            version=version,
            hash=digest,
            text=text,
            reason=reason,
            taken_us=taken_us,
            from_position=from_position,
        )
    )
    return version


def stored_epochs(connection: Connection) -> list[Epoch]:
    """Return the epochs, the oldest first."""
    return [_epoch(row) for row in connection.execute(select(epochs).order_by(epochs.c.epoch))]


def save_epoch(
    connection: Connection,
    *,
    opened_us: int,
    from_position: int,
    plan_version: int,
    key: bytes,
    reason: str,
    scope: dict[str, str],
) -> int:
    """Open a new epoch and return its number, counted from 1."""
    number = len(stored_epochs(connection)) + 1
    connection.execute(
        insert(epochs).values(
            epoch=number,
            opened_us=opened_us,
            from_position=from_position,
            plan_version=plan_version,
            key=key,
            reason=reason,
            scope=msgspec.json.encode(scope).decode(),
        )
    )
    return number


def _epoch(row: Any) -> Epoch:
    return Epoch(
        epoch=row.epoch,
        opened_at=from_us(row.opened_us),
        from_position=row.from_position,
        plan_version=row.plan_version,
        key=row.key,
        reason=row.reason,
        scope=msgspec.json.decode(row.scope, type=dict[str, str]),
    )
