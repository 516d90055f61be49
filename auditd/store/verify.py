"""Whether the store is whole: its pages, its counts and places, and every text and body in it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import islice
from pathlib import Path
from typing import Any

import msgspec
from sqlalchemy import Column, Connection, Table, func, select
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError

from auditd.errors import StoreDamaged
from auditd.records import Finding, Level
from auditd.store.copying import N_COMPLAINTS, integrity_complaints
from auditd.store.engine import open_engine
from auditd.store.runs import N_ROWS_A_FETCH, decode_responses
from auditd.store.tables import (
    answers,
    beats,
    cautions,
    checkpoints,
    configs,
    displays,
    epochs,
    looks,
    outbox,
    plans,
    runs,
)

_levels = msgspec.json.Decoder(dict[str, Level]).decode
_texts = msgspec.json.Decoder(dict[str, str]).decode
_finding = msgspec.json.Decoder(Finding).decode
_any = msgspec.json.Decoder().decode
_DECODED: tuple[tuple[Table, Column[Any], Column[Any], Callable[[str], object]], ...] = (
    (configs, configs.c.row, configs.c.cell, _levels),
    (configs, configs.c.row, configs.c.nuisance, _levels),
    (runs, runs.c.row, runs.c.responses, decode_responses),
    (runs, runs.c.row, runs.c.metadata, _any),
    (cautions, cautions.c.number, cautions.c.body, _finding),
    (answers, answers.c.row, answers.c.scope, _texts),
    (epochs, epochs.c.epoch, epochs.c.scope, _texts),
    (looks, looks.c.row, looks.c.body, _any),
    (outbox, outbox.c.row, outbox.c.body, _any),
    (displays, displays.c.name, displays.c.body, _any),
    (beats, beats.c.role, beats.c.body, _any),
)
"""Every JSON text of the store, with what has to come out of it."""

_SIGNS_OF_DAMAGE = ("malformed", "not a database", "disk I/O error", "invalid page", "could not read block")
"""What SQLite and PostgreSQL say of broken pages."""


def verify_store(url: URL) -> list[str]:
    """Return what is wrong with a store, at most some twenty complaints a question; nothing is written.

    Raises
    ------
    StoreError, Unavailable
        There is no store, it is of another revision, or its server does not answer.
    """
    try:
        engine = open_engine(url, read_only=True)
    except StoreDamaged as error:
        return [str(error)]
    complaints: list[str] = []
    if url.get_backend_name() == "sqlite":
        complaints += integrity_complaints(Path(url.database or ""))
    try:
        for question in (_places, _references, _contents):
            try:
                with engine.connect() as connection:
                    complaints += question(connection)
            except DBAPIError as error:
                if not any(sign in str(error.orig) for sign in _SIGNS_OF_DAMAGE):
                    raise
                complaints.append(f"the pages cannot be read: {error.orig}")
    finally:
        engine.dispose()
    return list(dict.fromkeys(complaints))


def _places(connection: Connection) -> list[str]:
    """Arrivals and positions begin at 0 and have no gap, each run has one, and no late run has a place."""
    complaints = []
    for column in (runs.c.arrival, runs.c.position):
        n, low, high = connection.execute(
            select(func.count(column), func.min(column), func.max(column))
        ).one()
        if n and (low != 0 or high != n - 1):
            complaints.append(
                f"{n} runs have a {column.name}, from {low} to {high}: it should be 0 to {n - 1}"
            )
    wrong = {
        "runs have a position, but were not taken up": runs.c.position.is_not(None)
        & runs.c.arrival.is_(None),
        "runs are late and have a position": runs.c.late & runs.c.position.is_not(None),
    }
    for words, condition in wrong.items():
        n = connection.execute(select(func.count()).select_from(runs).where(condition)).scalar_one()
        if n:
            complaints.append(f"{n} {words}")
    return complaints + _uniqueness(connection)


def _uniqueness(connection: Connection) -> list[str]:
    """No id, arrival or position is there twice, counted from the rows and not from an index."""
    complaints = []
    for column in (runs.c.id, runs.c.arrival, runs.c.position):
        kept = column + ("" if column is runs.c.id else 0)
        twice = select(kept).where(column.is_not(None)).group_by(kept).having(func.count() > 1)
        complaints += [
            f"the {column.name} {value!r} is there more than once"
            for value in connection.execute(twice.limit(N_COMPLAINTS)).scalars()
        ]
    return complaints


def _references(connection: Connection) -> list[str]:
    """What names a run's place, a warning, a plan or an epoch names one that is there."""
    n_placed = connection.execute(select(func.count(runs.c.position))).scalar_one()
    complaints = [
        f"the state {row.name!r} covers {row.position} runs, but {n_placed} have a place"
        for row in connection.execute(select(checkpoints).where(checkpoints.c.position > n_placed))
    ]
    complaints += _numbered(connection, plans.c.version, "plan versions")
    complaints += _numbered(connection, epochs.c.epoch, "epochs")
    complaints += _missing(connection, runs.c.config, configs.c.row, "runs", "configuration")
    complaints += _missing(connection, answers.c.caution, cautions.c.number, "answers", "warning")
    complaints += _missing(connection, outbox.c.caution, cautions.c.number, "alerts", "warning")
    complaints += _missing(connection, epochs.c.plan_version, plans.c.version, "epochs", "plan version")
    return complaints


def _numbered(connection: Connection, column: Column[Any], words: str) -> list[str]:
    n, low, high = connection.execute(select(func.count(), func.min(column), func.max(column))).one()
    return [f"{n} {words} are numbered {low} to {high}"] if n and (low, high) != (1, n) else []


def _missing(
    connection: Connection, naming: Column[Any], named: Column[Any], words: str, what: str
) -> list[str]:
    query = select(func.count()).where(naming.not_in(select(named)))
    n = connection.execute(query).scalar_one()
    return [f"{n} {words} name a {what} that is not there"] if n else []


def _contents(connection: Connection) -> list[str]:
    """Every text decodes to what it has to be."""
    complaints: list[str] = []
    for table, key, column, decode in _DECODED:
        wrong = islice(_undecodable(connection, key, column, decode), N_COMPLAINTS)
        complaints += [
            f"{table.name}.{column.name} of {key.name} {name} does not decode: {error}"
            for name, error in wrong
        ]
    return complaints


def _undecodable(
    connection: Connection, key: Column[Any], column: Column[Any], decode: Callable[[str], object]
) -> Iterator[tuple[object, str]]:
    result = connection.execute(select(key, column), execution_options={"yield_per": N_ROWS_A_FETCH})
    for name, text in result:
        try:
            decode(text)
        except (msgspec.MsgspecError, ValueError, TypeError, RecursionError) as error:
            yield name, str(error)
