"""Answers to queries, as plain documents for the command line; they only read."""

from __future__ import annotations

import os
import socket
from collections.abc import Iterable
from datetime import UTC, datetime
from typing import Any

import msgspec
from sqlalchemy import Connection, func, select

from auditd.errors import BadInput
from auditd.pipeline.campaign import Campaign
from auditd.records import GRADES, Caution, Effect, Grade, level_label
from auditd.store.cautions import caution_number, standing_by_grade, stored_cautions
from auditd.store.clock import rfc3339, to_us
from auditd.store.outbox import count_letters, last_error
from auditd.store.refusals import count_refusals, stored_refusals
from auditd.store.runs import StoredRun, count_runs, stored_runs
from auditd.store.states import Beat, stored_beats, stored_display
from auditd.store.tables import cautions, runs

ALIVE_S = 60.0
"""A daemon whose last sign of life is older is taken for dead."""
Document = dict[str, Any]  # a JSON document; its shape is the command's contract


def status_document(campaign: Campaign, now: datetime) -> Document:
    """Return what `status --json` shows."""
    with campaign.engine.connect() as connection:
        counts = count_runs(connection)
        shown = stored_display(connection, "status") or {}
        standing = standing_by_grade(connection)
        beat = stored_beats(connection).get("auditor")
        letters = count_letters(connection)
        trouble = last_error(connection)
        n_refused = count_refusals(connection)
    worst = next((grade for grade in reversed(GRADES) if standing[grade]), None)
    return {
        "schema": 1,
        "runs": counts.n,
        "completed": counts.n_completed,
        "refused": n_refused,
        "waiting": counts.n - counts.n_placed - counts.n_late,
        "audited": counts.n_placed,
        "scored": shown.get("scored", 0),
        "late": counts.n_late,
        "daemon": daemon_document(beat, now),
        "responses": shown.get("responses", {}),
        "strips": {name: one["mean"] for name, one in shown.get("strips", {}).items()},
        "withheld": shown.get("withheld", []),
        "warnings": {"standing": sum(standing.values()), "worst": worst, "by_grade": standing},
        "alerts": {**letters, "last_error": trouble},
        "store": campaign.url.database
        if campaign.url.get_backend_name() == "sqlite"
        else campaign.url.render_as_string(hide_password=True),
    }


def daemon_document(beat: Beat | None, now: datetime) -> Document:
    """Return whether the daemon lives, by its last sign of life and, on this machine, its process."""
    if beat is None:
        return {"alive": False, "ended": False, "pid": None, "host": None, "beat_age_s": None, "watch": None}
    age_s = max((now - beat.at).total_seconds(), 0.0)
    alive = age_s < ALIVE_S and not beat.body.get("ended", False)
    if alive and beat.host == socket.gethostname():
        alive = _exists(beat.pid)
    return {
        "alive": alive,
        "ended": bool(beat.body.get("ended", False)),
        "pid": beat.pid,
        "host": beat.host,
        "beat_age_s": round(age_s, 3),
        "watch": beat.body.get("watch"),
        "watch_reason": beat.body.get("reason"),
        "trouble": beat.body.get("trouble"),
        "files_waiting": beat.body.get("files_waiting", []),
    }


def _exists(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True


def runs_document(
    campaign: Campaign,
    *,
    where: Iterable[str] = (),
    since: datetime | None = None,
    order: str = "position",
    limit: int | None = None,
) -> Document:
    """Return what `runs --json` shows.

    Parameters
    ----------
    where : texts `name=value` over factors, nuisances, `status`, `seed`, `id`, `completed`, `late`, and
        metadata by a dotted path; all must hold.
    since : only runs that started, or else landed, at that time or later.
    order : `position`, `arrival` or `started`.

    Raises
    ------
    BadInput
        A condition is not `name=value`.
    """
    conditions = [_condition(text) for text in where]
    columns = {
        "position": (runs.c.position.is_(None), runs.c.position, runs.c.arrival),
        "arrival": (runs.c.arrival,),
        "started": (runs.c.started_us, runs.c.arrival),
    }[order]
    found: list[Document] = []
    with campaign.engine.connect() as connection:
        query = [] if since is None else [func.coalesce(runs.c.started_us, runs.c.landed_us) >= to_us(since)]
        for stored in _ordered(connection, query, columns):
            if all(_stated(stored, name) == value for name, value in conditions):
                found.append(run_document(stored))
                if limit is not None and len(found) == limit:
                    break
        total = count_runs(connection).n
    return {"schema": 1, "runs": found, "total": total}


def _ordered(connection: Connection, query: list[Any], columns: tuple[Any, ...]) -> Iterable[StoredRun]:
    first, *others = columns
    return stored_runs(connection, *query, order=first) if not others else _by(connection, query, columns)


def _by(connection: Connection, query: list[Any], columns: tuple[Any, ...]) -> Iterable[StoredRun]:
    from sqlalchemy.sql.expression import ClauseList

    return stored_runs(connection, *query, order=ClauseList(*columns))


def _condition(text: str) -> tuple[str, str]:
    name, sign, value = text.partition("=")
    if not sign or not name:
        raise BadInput(f"--where {text!r}: write name=value, for example host=n3")
    return name, value


def _stated(stored: StoredRun, name: str) -> str | None:
    """Return what a run states under a name, as its label."""
    run = stored.run
    for group in (run.cell, run.nuisance):
        if name in group:
            return level_label(group[name])
    if name in {"id", "status", "seed", "parent", "stage", "sequence", "completed"}:
        value = getattr(run, name)
        return None if value is None else str(value).lower() if isinstance(value, bool) else str(value)
    if name == "late":
        return str(stored.late).lower()
    found: Any = run.metadata  # JSON of unknown shape
    for part in name.split("."):
        found = found.get(part) if isinstance(found, dict) else None
    return None if found is None else level_label(found if isinstance(found, str) else _plain(found))


def _plain(value: Any) -> Any:  # a JSON value
    return msgspec.json.encode(value).decode() if isinstance(value, (dict, list)) else value


def run_document(stored: StoredRun) -> Document:
    """Return one run as `runs --json` shows it."""
    run = stored.run
    return {
        "id": run.id,
        "arrival": stored.arrival,
        "position": stored.position,
        "sequence": run.sequence,
        "started": rfc3339(run.started),
        "finished": rfc3339(run.finished),
        "seed": run.seed,
        "parent": run.parent,
        "status": run.status,
        "completed": run.completed,
        "cell": run.cell,
        "nuisance": run.nuisance,
        "responses": run.responses,
        "metadata": run.metadata,
        "source": {"path": run.path, "offset": run.offset},
        "late": stored.late,
    }


def refused_document(campaign: Campaign, limit: int | None = None) -> Document:
    """Return what `runs --refused --json` shows."""
    with campaign.engine.connect() as connection:
        found = stored_refusals(connection, limit)
        total = count_refusals(connection)
    return {
        "schema": 1,
        "refused": [
            {
                "path": one.refusal.path,
                "offset": one.refusal.offset,
                "number": one.refusal.number,
                "kind": one.refusal.kind,
                "id": one.refusal.id,
                "reason": one.refusal.reason,
                "at": rfc3339(one.at),
            }
            for one in found
        ],
        "total": total,
    }


def warnings_document(
    campaign: Campaign,
    *,
    kind: str | None = None,
    response: str | None = None,
    state: str | None = None,
    at_least: Grade | None = None,
    since: datetime | None = None,
) -> Document:
    """Return what `warnings --json` shows."""
    conditions = []
    if kind is not None:
        conditions.append(cautions.c.kind == kind)
    if response is not None:
        conditions.append(cautions.c.response == response)
    if state is not None:
        conditions.append(cautions.c.state == state)
    if at_least is not None:
        conditions.append(cautions.c.grade.in_(GRADES[GRADES.index(at_least) :]))
    if since is not None:
        conditions.append(cautions.c.raised_us >= to_us(since))
    with campaign.engine.connect() as connection:
        found = stored_cautions(connection, *conditions)
    return {"schema": 1, "warnings": [caution_document(caution) for caution in found]}


def effect_document(effect: Effect | None) -> Document | None:
    """Return an effect as every document shows it: name, value and interval."""
    if effect is None:
        return None
    return {"name": effect.name, "value": effect.value, "low": effect.low, "high": effect.high}


def caution_document(caution: Caution) -> Document:
    """Return one warning as `warnings --json` and an alert show it."""
    finding = caution.finding
    return {
        "id": caution.id,
        "kind": finding.kind,
        "along": finding.along,
        "level": finding.level,
        "response": finding.response,
        "grade": caution.grade,
        "state": caution.state,
        "raised_at": rfc3339(caution.raised_at),
        "run": finding.run,
        "index": finding.index,
        "n": finding.n,
        "since": finding.since,
        "since_low": finding.since_low,
        "since_high": finding.since_high,
        "log_e": finding.log_e,
        "threshold": finding.threshold,
        "evidence_loss": caution.evidence_loss,
        "effect": effect_document(finding.effect),
        "message": finding.message,
        "remedy": caution.remedy,
        "answer": caution.answer,
        "with": [msgspec.to_builtins(listed) for listed in finding.explains],
    }


def standing_at_least(campaign: Campaign, grade: Grade) -> bool:
    """Whether a warning of a grade or above stands."""
    with campaign.engine.connect() as connection:
        standing = standing_by_grade(connection)
    return any(standing[one] for one in GRADES[GRADES.index(grade) :])


def find_caution(campaign: Campaign, name: str) -> Caution:
    """Return a warning by its id.

    Raises
    ------
    BadInput
        There is none of that id.
    """
    number = caution_number(name)
    with campaign.engine.connect() as connection:
        found = [] if number is None else stored_cautions(connection, cautions.c.number == number)
        if not found:
            last = connection.execute(select(func.max(cautions.c.number))).scalar()
            known = f"the warnings are W1 to W{last}" if last else "no warning has been raised"
            raise BadInput(f"there is no warning {name!r}; {known}")
    return found[0]


def find_run(campaign: Campaign, name: str) -> StoredRun:
    """Return a run by its id.

    Raises
    ------
    BadInput
        There is none of that id.
    """
    with campaign.engine.connect() as connection:
        found = list(stored_runs(connection, runs.c.id == name))
    if not found:
        raise BadInput(f"there is no run {name!r}; `runaudit runs` lists them")
    return found[0]


def now_utc() -> datetime:
    """Return the clock's time."""
    return datetime.now(UTC)
