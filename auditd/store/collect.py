"""Many collectors' runs into one PostgreSQL store: by COPY into a stage, then each id once.

A collector gives neither arrival nor position: the auditor takes up what has none (`give_arrivals`), in the
order of the rows. The row's number is given when a run is inserted, so that a collector which commits late
may have lower numbers than runs that were taken up already; arrivals are given to what is there.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from typing import Any

import msgspec
from sqlalchemy import Connection

from auditd.records import Refusal, Run
from auditd.store.runs import rewrite_refusal, run_values

_COLUMNS = (
    "id", "path", "offset", "number", "ordered", "sequence", "started_us", "finished_us", "landed_us", "seed",
    "parent", "status", "stage", "completed", "responses", "metadata", "digest",
)  # fmt: skip
_TYPES = (
    "text", "text", "int8", "int8", "bool", "int8", "int8", "int8", "int8", "text",
    "text", "text", "text", "bool", "text", "text", "bytea",
)  # fmt: skip
_STAGE = (
    "CREATE TEMPORARY TABLE IF NOT EXISTS run_stage (place int8, config_hash bytea, "
    + ", ".join(f'"{name}" {kind}' for name, kind in zip(_COLUMNS, _TYPES, strict=True))
    + ") ON COMMIT DELETE ROWS"
)
_CONFIGS_STAGE = (
    "CREATE TEMPORARY TABLE IF NOT EXISTS config_stage (hash bytea, cell text, nuisance text) "
    "ON COMMIT DELETE ROWS"
)
_QUOTED = ", ".join(f'"{name}"' for name in _COLUMNS)
_NEW_CONFIGS = (
    "INSERT INTO configs (hash, cell, nuisance) SELECT hash, cell, nuisance FROM config_stage ORDER BY hash "
    "ON CONFLICT (hash) DO NOTHING"
)
_NEW_RUNS = (
    # rows are numbered in the batch's order, and inserted in the order of ids
    "WITH once AS (SELECT DISTINCT ON (id) * FROM run_stage ORDER BY id, place), "  # noqa: S608 - names of this file only
    "numbered AS (SELECT nextval(pg_get_serial_sequence('runs', 'row')) AS new_row, placed.* "
    "FROM (SELECT * FROM once ORDER BY place) AS placed), "
    f'made AS (INSERT INTO runs ("row", config, {_QUOTED}) '
    f"SELECT new_row, configs.row, {', '.join(f'numbered.{name}' for name in _QUOTED.split(', '))} "
    "FROM numbered JOIN configs ON configs.hash = numbered.config_hash ORDER BY numbered.id "
    "ON CONFLICT (id) DO NOTHING RETURNING id) SELECT count(*) FROM made"
)
_REWRITTEN = (
    "SELECT run_stage.place FROM run_stage JOIN runs USING (id) "
    "WHERE runs.digest <> run_stage.digest ORDER BY run_stage.place"
)


class Collected(msgspec.Struct, frozen=True, kw_only=True):
    """What became of a batch: how many runs are new, refusals for rewrites, repeats passed over."""

    n_new: int
    rewritten: tuple[Refusal, ...]
    n_seen_before: int


def collect_runs(connection: Connection, batch: Sequence[tuple[Run, bool]], *, landed_us: int) -> Collected:
    """Insert a collector's runs, each with whether its place in its file says its order, once by id.

    Rows are inserted in the order of their ids, so that two collectors with runs in common wait for one
    another and never for each other. As with `insert_runs`, an id that is there with other content is
    refused, within the batch too.
    """
    if not batch:
        return Collected(n_new=0, rewritten=(), n_seen_before=0)
    connection.exec_driver_sql(_STAGE)
    connection.exec_driver_sql(_CONFIGS_STAGE)
    _fill_stages(connection, batch, landed_us)
    connection.exec_driver_sql(_NEW_CONFIGS)
    n_new = connection.exec_driver_sql(_NEW_RUNS).scalar_one()
    places = list(connection.exec_driver_sql(_REWRITTEN).scalars())
    connection.exec_driver_sql("TRUNCATE run_stage, config_stage")
    return Collected(
        n_new=n_new,
        rewritten=tuple(rewrite_refusal(batch[place][0]) for place in places),
        n_seen_before=len(batch) - n_new - len(places),
    )


def _fill_stages(connection: Connection, batch: Sequence[tuple[Run, bool]], landed_us: int) -> None:
    driver: Any = (
        connection.connection.driver_connection
    )  # psycopg's own connection: COPY is not SQLAlchemy's
    known: dict[bytes, bytes] = {}
    with driver.cursor() as cursor:
        with cursor.copy(
            f"COPY run_stage (place, config_hash, {_QUOTED}) FROM STDIN (FORMAT BINARY)"
        ) as copy:
            copy.set_types(["int8", "bytea", *_TYPES])
            for place, (run, ordered) in enumerate(batch):
                name = msgspec.json.encode(run.cell) + b"\n" + msgspec.json.encode(run.nuisance)
                if name not in known:
                    known[name] = hashlib.blake2b(name, digest_size=16).digest()
                values = run_values(run, 0, landed_us, ordered=ordered)
                copy.write_row((place, known[name], *(values[column] for column in _COLUMNS)))
        with cursor.copy("COPY config_stage (hash, cell, nuisance) FROM STDIN (FORMAT BINARY)") as copy:
            copy.set_types(["bytea", "text", "text"])
            for name, digest in known.items():
                cell, nuisance = name.decode().split("\n")
                copy.write_row((digest, cell, nuisance))
