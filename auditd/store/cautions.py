"""Warnings as kept: one a condition, with grade and state; never deleted."""

from __future__ import annotations

from typing import Any

import msgspec
from sqlalchemy import Connection, func, insert, select, update

from auditd.records import GRADES, Caution, Finding, Grade
from auditd.store.clock import from_us, to_us
from auditd.store.tables import answers, cautions


def save_caution(connection: Connection, caution: Caution, *, epoch: int) -> Caution | None:
    """Insert a warning and return it with its id; None where its condition is kept already."""
    finding = caution.finding
    known = connection.execute(select(cautions.c.number).where(cautions.c.key == finding.key)).scalar()
    if known is not None:
        return None
    raised_us = to_us(caution.raised_at)
    connection.execute(
        insert(cautions).values(
            key=finding.key,
            raised_us=raised_us,
            epoch=epoch,
            state=caution.state,
            **_changing(caution, raised_us),
        )
    )
    number = connection.execute(select(cautions.c.number).where(cautions.c.key == finding.key)).scalar_one()
    return msgspec.structs.replace(caution, id=f"W{number}")


def update_caution(connection: Connection, caution: Caution, *, changed_us: int) -> None:
    """Store a warning's newer finding, grade, remedy and state under its id."""
    connection.execute(
        update(cautions)
        .where(cautions.c.number == caution_number(caution.id))
        .values(state=caution.state, **_changing(caution, changed_us))
    )


def _changing(caution: Caution, changed_us: int) -> dict[str, Any]:
    finding = caution.finding
    return {
        "kind": finding.kind,
        "along": finding.along,
        "level": finding.level,
        "response": finding.response,
        "run": finding.run,
        "position": finding.index,
        "log_e": finding.log_e,
        "threshold": finding.threshold,
        "grade": caution.grade,
        "evidence_loss": caution.evidence_loss,
        "changed_us": changed_us,
        "remedy": caution.remedy,
        "body": msgspec.json.encode(finding).decode(),
    }


def caution_number(name: str) -> int | None:
    """Return the number in an id such as `W7`; None where it is not one."""
    digits = name[1:]
    return int(digits) if name[:1] in {"W", "w"} and digits.isascii() and digits.isdigit() else None


def stored_cautions(connection: Connection, *conditions: Any) -> list[Caution]:
    """Return warnings under SQLAlchemy conditions on the table, in the order in which they were raised."""
    replies = {
        row.caution: row.reason
        for row in connection.execute(select(answers.c.caution, answers.c.reason).order_by(answers.c.row))
    }
    query = select(cautions).where(*conditions).order_by(cautions.c.number)
    return [_caution(row, replies.get(row.number)) for row in connection.execute(query)]


def _caution(row: Any, reply: str | None) -> Caution:
    return Caution(
        id=f"W{row.number}",
        finding=msgspec.json.decode(row.body, type=Finding),
        grade=row.grade,
        state=row.state,
        raised_at=from_us(row.raised_us),
        evidence_loss=row.evidence_loss,
        remedy=row.remedy,
        answer=reply,
    )


def standing_by_grade(connection: Connection) -> dict[Grade, int]:
    """Count the standing warnings of each grade."""
    query = (
        select(cautions.c.grade, func.count())
        .where(cautions.c.state == "standing")
        .group_by(cautions.c.grade)
    )
    counts = {row[0]: row[1] for row in connection.execute(query)}
    return {grade: counts.get(grade, 0) for grade in GRADES}
