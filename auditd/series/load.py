"""Reading the store into a table of columns."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from datetime import UTC, datetime
from typing import Any

import msgspec
import numpy as np
from sqlalchemy import Connection, select

from auditd.plan import AUTO_RESPONSES, Plan
from auditd.records import NOT_STATED, Level, cell_label, level_label
from auditd.series.table import Coded, Flags, Floats, Ints, RunTable
from auditd.store.answers import Answer, stored_answers
from auditd.store.tables import answers, configs, runs

_decode = msgspec.json.Decoder(dict[str, float | str]).decode
_levels = msgspec.json.Decoder(dict[str, Level]).decode
_COLUMNS = (
    "id", "position", "arrival", "late", "ordered", "completed", "sequence", "started_us", "finished_us",
    "landed_us", "seed", "parent", "stage", "config", "responses",
)  # fmt: skip


def load_table(connection: Connection, plan: Plan) -> RunTable:
    """Read every run that has been taken up, in its true order."""
    query = select(*(runs.c[name] for name in _COLUMNS)).where(runs.c.arrival.is_not(None))
    rows = connection.execute(query.order_by(runs.c.arrival)).fetchall()
    columns: dict[str, Sequence[Any]] = dict(
        zip(_COLUMNS, zip(*rows, strict=True) if rows else [()] * len(_COLUMNS), strict=True)
    )
    del rows
    table = _table(columns, _configs(connection), plan, _set_aside_answers(connection))
    return _in_true_order(table, order_of(plan))


def order_of(plan: Plan) -> str:
    """Return by what the plan orders its runs: `sequence`, `started` or `arrival`."""
    if plan.order.by is not None:
        return plan.order.by
    if plan.record.sequence is not None:
        return "sequence"
    return "arrival" if plan.record.started is None else "started"


def response_names(plan: Plan) -> tuple[str, ...]:
    """Return the responses that a plan can have: its own, and those added by themselves."""
    added = [
        name
        for name, stated in zip(
            AUTO_RESPONSES,
            (
                plan.record.started is not None and plan.record.finished is not None,
                plan.record.status is not None,
            ),
            strict=True,
        )
        if stated
    ]
    return (*plan.responses, *added)


def _configs(connection: Connection) -> dict[int, tuple[dict[str, Level], dict[str, Level]]]:
    return {
        row.row: (_levels(row.cell), _levels(row.nuisance)) for row in connection.execute(select(configs))
    }


def nuisance_levels(connection: Connection, name: str) -> list[str]:
    """Return the labels of a nuisance's levels that runs have, sorted."""
    found = {nuisance.get(name, NOT_STATED) for _, nuisance in _configs(connection).values()}
    return sorted(map(level_label, found))


def _set_aside_answers(connection: Connection) -> list[Answer]:
    return stored_answers(connection, answers.c.action == "set-aside")


def _table(
    columns: dict[str, Sequence[Any]],
    known: dict[int, tuple[dict[str, Level], dict[str, Level]]],
    plan: Plan,
    asides: list[Answer],
) -> RunTable:
    config_codes, config_rows = _codes_of(columns["config"])
    cells, cell_values = _cells([known[row][0] for row in config_rows], config_codes)
    nuisance = {
        name: _nuisance([known[row][1] for row in config_rows], config_codes, name) for name in plan.nuisance
    }
    ids = _objects(columns["id"])
    started = _seconds(columns["started_us"])
    arrivals = np.array(columns["arrival"], dtype=np.int64)
    positions = np.array([-1 if p is None else p for p in columns["position"]], dtype=np.int64)
    table = RunTable(
        ids=ids,
        positions=positions,
        arrivals=arrivals,
        late=np.array(columns["late"], dtype=bool),
        ordered=np.array(columns["ordered"], dtype=bool),
        completed=np.array(columns["completed"], dtype=bool),
        set_aside=np.zeros(len(ids), dtype=bool),
        sequence=_floats(columns["sequence"]),
        started=started,
        finished=_seconds(columns["finished_us"]),
        landed=_seconds(columns["landed_us"]),
        cells=cells,
        cell_values=cell_values,
        nuisance=nuisance,
        seeds=_texts(columns["seed"]) if plan.record.seed else None,
        parents=_parents(columns["id"], columns["parent"]) if plan.record.parent else None,
        stages=_texts(columns["stage"]) if plan.design.stage else None,
        responses=_responses(columns["responses"], response_names(plan)),
    )
    for answer in asides:
        table.set_aside[:] |= scope_flags(table, answer.scope)
    return table


def scope_flags(table: RunTable, scope: dict[str, str]) -> Flags:
    """Return which runs an answer's scope takes in: its nuisance levels, from and to a run or a time."""
    flags = np.ones(table.n, dtype=bool)
    for name, level in scope.items():
        if name in {"from", "to"}:
            flags &= _beyond(table, level, since=name == "from")
        else:
            coded = table.nuisance.get(name)
            levels = () if coded is None else coded.levels
            flags &= coded.codes == levels.index(level) if coded and level in levels else False
    return flags


def _beyond(table: RunTable, bound: str, *, since: bool) -> Flags:
    found = np.flatnonzero(table.ids == bound)
    if len(found):
        of: Ints | Floats = table.positions
        at = float(table.positions[found[0]])
    else:
        of = np.where(np.isnan(table.started), table.landed, table.started)
        stated = datetime.fromisoformat(bound)
        at = (stated if stated.tzinfo is not None else stated.replace(tzinfo=UTC)).timestamp()
    return np.greater_equal(of, at) if since else np.less_equal(of, at)


def _in_true_order(table: RunTable, by: str) -> RunTable:
    """Sort the columns by what the plan says, arrivals breaking ties; unplaced runs without a key go last."""
    if by == "sequence":
        key = table.sequence
    elif by == "started":
        key = np.where(np.isnan(table.started), table.finished, table.started)
    else:
        key = table.arrivals.astype(np.float64)
    order = np.lexsort((table.arrivals, _tie(table), key))
    where = np.empty(table.n, dtype=np.int64)
    where[order] = np.arange(table.n)
    parents = table.parents
    if parents is not None:
        moved = parents[order]
        parents = np.where(moved >= 0, where[moved], -1)
    plain = {
        name: getattr(table, name)[order]
        for name in (
            "ids", "positions", "arrivals", "late", "ordered", "completed", "set_aside", "sequence",
            "started", "finished", "landed",
        )
    }  # fmt: skip
    return RunTable(
        **plain,
        cells=table.cells.take(order),
        cell_values=table.cell_values,
        nuisance={name: coded.take(order) for name, coded in table.nuisance.items()},
        seeds=None if table.seeds is None else table.seeds.take(order),
        parents=parents,
        stages=None if table.stages is None else table.stages.take(order),
        responses={name: values[order] for name, values in table.responses.items()},
    )


def _tie(table: RunTable) -> Ints:
    """Return positions as the second key, so that equal starts keep the places that they were given."""
    return np.where(table.positions < 0, np.iinfo(np.int64).max, table.positions)


def _codes_of(values: Iterable[Any]) -> tuple[Ints, list[Any]]:
    """Return codes in order of first appearance, and the values."""
    seen: dict[Any, int] = {}
    codes = np.array([seen.setdefault(value, len(seen)) for value in values], dtype=np.int64)
    return codes, list(seen)


def _cells(
    of_config: list[dict[str, Level]], config_codes: Ints
) -> tuple[Coded, tuple[dict[str, Level], ...]]:
    values: dict[str, dict[str, Level]] = {}
    for cell in of_config:
        values.setdefault(cell_label(cell), cell)
    labels = tuple(sorted(values))
    lookup = np.array([labels.index(cell_label(cell)) for cell in of_config], dtype=np.int64)
    codes = lookup[config_codes] if len(config_codes) else config_codes
    return Coded(codes=codes, levels=labels), tuple(values[label] for label in labels)


def _nuisance(of_config: list[dict[str, Level]], config_codes: Ints, name: str) -> Coded:
    stated = [level_label(level[name]) if name in level else NOT_STATED for level in of_config]
    labels = tuple(sorted(set(stated)))
    lookup = np.array([labels.index(label) for label in stated], dtype=np.int64)
    return Coded(codes=lookup[config_codes] if len(config_codes) else config_codes, levels=labels)


def _texts(values: Sequence[str | None]) -> Coded:
    """Return texts as codes; a text that is not stated has the code -1."""
    seen: dict[str, int] = {}
    codes = np.array(
        [-1 if value is None else seen.setdefault(value, len(seen)) for value in values], dtype=np.int64
    )
    return Coded(codes=codes, levels=tuple(seen))


def _parents(ids: Sequence[str], parents: Sequence[str | None]) -> Ints:
    where = {name: number for number, name in enumerate(ids)}
    return np.array([-1 if p is None else where.get(p, -1) for p in parents], dtype=np.int64)


def _responses(texts: Sequence[str], names: tuple[str, ...]) -> dict[str, Floats]:
    found = {name: np.full(len(texts), np.nan) for name in names}
    for number, text in enumerate(texts):
        for name, value in _decode(text).items():
            if name in found:
                found[name][number] = value
    return found


def _objects(values: Sequence[str]) -> np.ndarray[Any, np.dtype[np.object_]]:
    kept = np.empty(len(values), dtype=object)
    kept[:] = values
    return kept


def _floats(values: Sequence[int | None]) -> Floats:
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)


def _seconds(values: Sequence[int | None]) -> Floats:
    return _floats(values) / 1e6
