"""Runs as kept: insertion exactly once, arrival, place in the order, and reading them back."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

import msgspec
from sqlalchemy import Connection, bindparam, func, insert, literal, select, update

from auditd.records import Level, Refusal, Run
from auditd.store.clock import from_us, to_us
from auditd.store.tables import configs, runs

N_IDS_A_QUERY = 500
"""Ids asked for in one statement; SQLite's oldest limit on parameters is 999."""
N_ROWS_A_FETCH = 5000
_WORDS = {math.inf: "Infinity", -math.inf: "-Infinity"}
_responses_decoder = msgspec.json.Decoder(dict[str, float | str])
_levels_decoder = msgspec.json.Decoder(dict[str, Level])


class StoredRun(msgspec.Struct, frozen=True, kw_only=True, gc=False):
    """A run with what the store knows of it besides; in no cycle, hence not looked at for any."""

    row: int
    arrival: int | None
    position: int | None
    late: bool
    ordered: bool
    landed_us: int
    run: Run


class Inserted(msgspec.Struct, frozen=True, kw_only=True):
    """What became of a batch: new runs, refusals for ids seen with other content, repeats passed over."""

    stored: tuple[StoredRun, ...]
    rewritten: tuple[Refusal, ...]
    n_seen_before: int


class ConfigRows:
    """Rows of configurations, each cell and nuisance combination kept once."""

    def __init__(self) -> None:
        self._rows: dict[bytes, int] = {}

    def row(self, connection: Connection, run: Run) -> int:
        """Return the row of a run's configuration, inserting it where it is new."""
        cell = msgspec.json.encode(run.cell)
        nuisance = msgspec.json.encode(run.nuisance)
        name = cell + b"\n" + nuisance
        found = self._rows.get(name)
        if found is None:
            found = self._rows[name] = self._find_or_insert(connection, name, cell, nuisance)
        return found

    def forget(self) -> None:
        """Drop the memory after a transaction that was rolled back."""
        self._rows.clear()

    @staticmethod
    def _find_or_insert(connection: Connection, name: bytes, cell: bytes, nuisance: bytes) -> int:
        digest = hashlib.blake2b(name, digest_size=16).digest()
        query = select(configs.c.row).where(configs.c.hash == digest)
        row = connection.execute(query).scalar()
        if row is None:
            values = {"hash": digest, "cell": cell.decode(), "nuisance": nuisance.decode()}
            if connection.dialect.name == "postgresql":
                from sqlalchemy.dialects import postgresql

                connection.execute(postgresql.insert(configs).values(values).on_conflict_do_nothing())
            else:
                connection.execute(insert(configs).values(values))
            row = connection.execute(query).scalar_one()
        return int(row)


def insert_runs(
    connection: Connection,
    batch: Sequence[tuple[Run, bool]],
    *,
    landed_us: int,
    config_rows: ConfigRows,
    first_arrival: int | None,
) -> Inserted:
    """Insert runs, each with whether its place in its file says its order, exactly once by id.

    An id that is there with the same content is passed over; with other content it is refused. With
    `first_arrival` the runs are taken up at once; without, an auditor takes them up later.
    """
    known = _digests(connection, [run.id for run, _ in batch])
    fresh: list[tuple[Run, bool]] = []
    rewritten: list[Refusal] = []
    for run, ordered in batch:
        digest = known.get(run.id)
        if digest is None:
            known[run.id] = run.digest
            fresh.append((run, ordered))
        elif digest != run.digest:
            rewritten.append(rewrite_refusal(run))
    stored = _insert(connection, fresh, landed_us, config_rows, first_arrival) if fresh else ()
    n_seen = len(batch) - len(fresh) - len(rewritten)
    return Inserted(stored=stored, rewritten=tuple(rewritten), n_seen_before=n_seen)


def rewrite_refusal(run: Run) -> Refusal:
    """Return the refusal of a run whose id was taken before with other content."""
    return Refusal(
        path=run.path,
        offset=run.offset,
        number=run.number,
        kind="rewrite",
        id=run.id,
        reason=f"the id {run.id!r} was taken before with other content; the first record is kept",
    )


def _digests(connection: Connection, ids: list[str]) -> dict[str, bytes]:
    found: dict[str, bytes] = {}
    for start in range(0, len(ids), N_IDS_A_QUERY):
        query = select(runs.c.id, runs.c.digest).where(runs.c.id.in_(ids[start : start + N_IDS_A_QUERY]))
        found.update((row.id, row.digest) for row in connection.execute(query))
    return found


def _insert(
    connection: Connection,
    fresh: list[tuple[Run, bool]],
    landed_us: int,
    config_rows: ConfigRows,
    first_arrival: int | None,
) -> tuple[StoredRun, ...]:
    numbers = _row_numbers(connection, len(fresh))
    arrivals: Iterable[int | None] = (
        [None] * len(fresh) if first_arrival is None else range(first_arrival, first_arrival + len(fresh))
    )
    rows, stored = [], []
    for number, (run, ordered), arrival in zip(numbers, fresh, arrivals, strict=True):
        values = run_values(run, config_rows.row(connection, run), landed_us, ordered=ordered)
        rows.append(values | {"row": number, "arrival": arrival})
        stored.append(
            StoredRun(
                row=number,
                arrival=arrival,
                position=None,
                late=False,
                ordered=ordered,
                landed_us=landed_us,
                run=run,
            )
        )
    connection.execute(insert(runs), rows)
    return tuple(stored) if first_arrival is not None else ()


def _row_numbers(connection: Connection, n: int) -> Sequence[int]:
    """Return numbers for new rows; a server's sequence must move with them, or collectors' rows collide."""
    if connection.dialect.name == "postgresql":
        query = "SELECT nextval(pg_get_serial_sequence('runs', 'row')) FROM generate_series(1, %(n)s)"
        return sorted(connection.exec_driver_sql(query, {"n": n}).scalars())
    last = connection.execute(select(func.max(runs.c.row))).scalar() or 0
    return range(last + 1, last + 1 + n)


def run_values(run: Run, config: int, landed_us: int, *, ordered: bool) -> dict[str, Any]:
    """Return a run's columns, without row, arrival and position."""
    return {
        "id": run.id,
        "path": run.path,
        "offset": run.offset,
        "number": run.number,
        "config": config,
        "ordered": ordered,
        "sequence": run.sequence,
        "started_us": None if run.started is None else to_us(run.started),
        "finished_us": None if run.finished is None else to_us(run.finished),
        "landed_us": landed_us,
        "seed": run.seed,
        "parent": run.parent,
        "status": run.status,
        "stage": run.stage,
        "completed": run.completed,
        "responses": encode_responses(run.responses),
        "metadata": msgspec.json.encode(run.metadata).decode(),
        "digest": run.digest,
    }


def encode_responses(responses: dict[str, float]) -> str:
    """Return responses as JSON; NaN and infinities, which JSON lacks, as words."""
    kept: dict[str, float | str] = {}
    for name, value in responses.items():
        kept[name] = value if math.isfinite(value) else _WORDS.get(value, "NaN")
    return msgspec.json.encode(kept).decode()


def decode_responses(text: str) -> dict[str, float]:
    """Return what `encode_responses` kept."""
    found = _responses_decoder.decode(text)
    if str in map(type, found.values()):
        return {name: float(value) for name, value in found.items()}
    return found  # type: ignore[return-value] # no word is left in it


_KEPT = tuple(column for column in runs.c if column.name not in {"config", "metadata"})
_COLUMNS = (*_KEPT, configs.c.cell, configs.c.nuisance)


def stored_runs(
    connection: Connection, *conditions: Any, order: Any = None, with_metadata: bool = True
) -> Iterator[StoredRun]:
    """Yield runs under SQLAlchemy conditions, by arrival unless another order is given.

    Without metadata they come quicker: nothing that audits asks for it.
    """
    columns = (*_COLUMNS, runs.c.metadata if with_metadata else literal("{}"))
    query = select(*columns).join(configs, configs.c.row == runs.c.config).where(*conditions)
    query = query.order_by(runs.c.arrival if order is None else order)
    # an option of the statement: one of the connection would stay, and stop executemany on a server
    result = connection.execute(query, execution_options={"yield_per": N_ROWS_A_FETCH})
    levels: dict[str, dict[str, Level]] = {}
    for row in result:
        yield _stored(row, levels)


def _stored(found: Any, levels: dict[str, dict[str, Level]]) -> StoredRun:
    # the columns of `_COLUMNS`, unpacked: by name each would be looked up a million times
    (
        row, name, arrival, position, late, ordered, path, offset, number, sequence, started_us, finished_us,
        landed_us, seed, parent, status, stage, completed, responses, digest, cell, nuisance, metadata,
    ) = found  # fmt: skip
    for text in (cell, nuisance):
        if text not in levels:
            levels[text] = _levels_decoder.decode(text)
    run = Run(
        id=name,
        path=path,
        offset=offset,
        number=number,
        sequence=sequence,
        started=None if started_us is None else from_us(started_us),
        finished=None if finished_us is None else from_us(finished_us),
        seed=seed,
        parent=parent,
        status=status,
        stage=stage,
        completed=completed,
        cell=levels[cell],
        nuisance=levels[nuisance],
        responses=decode_responses(responses),
        metadata={} if metadata == "{}" else msgspec.json.decode(metadata),
        digest=digest,
    )
    return StoredRun(
        row=row,
        arrival=arrival,
        position=position,
        late=late,
        ordered=ordered,
        landed_us=landed_us,
        run=run,
    )


def give_arrivals(
    connection: Connection, first_arrival: int, by: str = "arrival", *, with_metadata: bool = True
) -> Iterator[StoredRun]:
    """Take up runs that were inserted without an arrival, and yield them.

    They are numbered by `sequence` or `started`, or in the order of insertion (`arrival`), which also breaks
    ties: what a backfill found at once is told in the order in which it was made.
    """
    keys = {"sequence": runs.c.sequence, "started": func.coalesce(runs.c.started_us, runs.c.finished_us)}
    order = [runs.c.row] if by not in keys else [keys[by].is_(None), keys[by], runs.c.row]
    place = func.row_number().over(order_by=order) - 1
    numbered = select(runs.c.row, place.label("place")).where(runs.c.arrival.is_(None)).subquery()
    connection.execute(
        update(runs).where(runs.c.row == numbered.c.row).values(arrival=first_arrival + numbered.c.place)
    )
    return stored_runs(connection, runs.c.arrival >= first_arrival, with_metadata=with_metadata)


def give_positions(connection: Connection, places: Sequence[tuple[int, int]]) -> None:
    """Store the positions of rows, as pairs (row, position)."""
    if places:
        connection.execute(
            update(runs).where(runs.c.row == bindparam("of_row")).values(position=bindparam("new_position")),
            [{"of_row": row, "new_position": position} for row, position in places],
        )


def mark_late(connection: Connection, rows: Sequence[int]) -> None:
    """Store that runs came after their place had passed."""
    if rows:
        connection.execute(
            update(runs).where(runs.c.row == bindparam("of_row")).values(late=True),
            [{"of_row": row} for row in rows],
        )


def last_arrived(connection: Connection) -> tuple[str, int] | None:
    """Return id and landing (microseconds) of the run that was taken up last."""
    query = select(runs.c.id, runs.c.landed_us).where(runs.c.arrival.is_not(None))
    row = connection.execute(query.order_by(runs.c.arrival.desc()).limit(1)).first()
    return None if row is None else (row.id, row.landed_us)


class RunCounts(msgspec.Struct, frozen=True, kw_only=True):
    """Totals over the stored runs."""

    n: int
    n_completed: int
    n_late: int
    n_placed: int
    n_arrived: int
    next_arrival: int
    next_position: int


def count_runs(connection: Connection) -> RunCounts:
    """Count runs, without reading them."""
    total, completed, late, placed, arrived, last_arrival, last_position = connection.execute(
        select(
            func.count(),
            func.count().filter(runs.c.completed),
            func.count().filter(runs.c.late),
            func.count(runs.c.position),
            func.count(runs.c.arrival),
            func.max(runs.c.arrival),
            func.max(runs.c.position),
        )
    ).one()
    return RunCounts(
        n=total,
        n_completed=completed,
        n_late=late,
        n_placed=placed,
        n_arrived=arrived,
        next_arrival=0 if last_arrival is None else last_arrival + 1,
        next_position=0 if last_position is None else last_position + 1,
    )
