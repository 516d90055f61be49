"""`export`: runs, series and warnings as flat rows for other programs."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any, Literal

import msgspec
import numpy as np
from sqlalchemy import Connection

from auditd.errors import CannotCreate
from auditd.pipeline.asking import caution_document
from auditd.pipeline.campaign import Campaign, plan_in_use
from auditd.pipeline.export_formats import WRITERS, Column, Format, Sink, Table
from auditd.pipeline.reporting import replaced_file
from auditd.plan import Plan
from auditd.report.observed import deviations
from auditd.series.load import load_table, response_names
from auditd.store.cautions import stored_cautions
from auditd.store.clock import from_us
from auditd.store.runs import StoredRun, stored_runs
from auditd.store.tables import runs

What = Literal["runs", "series", "warnings"]


def export(campaign: Campaign, what: What, form: Format, path: Path | None, stdout: Sink) -> int:
    """Write what is asked for to a file, whole or not at all, or to `stdout`; return the number of rows.

    Raises
    ------
    CannotCreate
        The file cannot be written, or Parquet has no file to go to.
    """
    if path is None and form == "parquet":
        raise CannotCreate("Parquet is no text for a terminal or a pipe; name a file with -o")
    with campaign.engine.connect() as connection:
        table = _TABLES[what](connection, plan_in_use(connection, campaign.plan))
        if path is None:
            return WRITERS[form](what, table, stdout)
        with replaced_file(path) as stream:
            return WRITERS[form](what, table, stream)


def runs_table(connection: Connection, plan: Plan) -> Table:
    """Return every run with all its columns, in order of arrival."""
    names = response_names(plan)
    columns = [
        *(Column(name, "text") for name in ("id",)),
        *(Column(name, "integer") for name in ("arrival", "position", "sequence")),
        *(Column(name, "time") for name in ("started", "finished", "landed")),
        *(Column(name, "text") for name in ("seed", "parent", "stage", "status")),
        *(Column(name, "flag") for name in ("completed", "late", "ordered")),
        *(Column(f"factor.{name}", "level") for name in plan.factors),
        *(Column(f"nuisance.{name}", "level") for name in plan.nuisance),
        *(Column(f"response.{name}", "number") for name in names),
        Column("path", "text"),
        Column("offset", "integer"),
        Column("number", "integer"),
        Column("metadata", "text"),
    ]
    return Table(
        columns=columns,
        rows=(_run_row(one, plan, names) for one in stored_runs(connection, order=runs.c.row)),
    )


def _run_row(stored: StoredRun, plan: Plan, names: tuple[str, ...]) -> list[Any]:
    run = stored.run
    return [
        run.id, stored.arrival, stored.position, run.sequence,
        run.started, run.finished, from_us(stored.landed_us),
        run.seed, run.parent, run.stage, run.status,
        run.completed, stored.late, stored.ordered,
        *(run.cell.get(name) for name in plan.factors),
        *(run.nuisance.get(name) for name in plan.nuisance),
        *(run.responses.get(name) for name in names),
        run.path, run.offset, run.number,
        msgspec.json.encode(run.metadata).decode(),
    ]  # fmt: skip


def series_table(connection: Connection, plan: Plan) -> Table:
    """Return each response in order, on its audited scale, and what is left less the cells' means."""
    table = load_table(connection, plan)
    columns = [
        Column("response", "text"),
        Column("place", "integer"),
        Column("position", "integer"),
        Column("id", "text"),
        Column("cell", "text"),
        *(Column(f"nuisance.{name}", "text") for name in plan.nuisance),
        Column("started", "time"),
        Column("value", "number"),
        Column("residual", "number"),
        Column("set_aside", "flag"),
    ]

    def rows() -> Iterator[list[Any]]:
        for response in response_names(plan):
            series = table.series(plan, response, with_set_aside=True)
            aside = table.set_aside[series.row]
            residuals = deviations(series.values, series.cells, aside)
            labels = [coded.labels() for coded in series.nuisance.values()]
            cells = series.cells.labels()
            for k in range(len(series.values)):
                at = series.started[k]
                yield [
                    response,
                    int(series.row[k]),
                    int(series.positions[k]) if series.positions[k] >= 0 else None,
                    str(series.ids[k]),
                    str(cells[k]),
                    *(str(label[k]) for label in labels),
                    None if np.isnan(at) else from_us(round(at * 1e6)),
                    float(series.values[k]),
                    float(residuals[k]),
                    bool(aside[k]),
                ]

    return Table(columns=columns, rows=rows())


def warnings_table(connection: Connection, _plan: Plan) -> Table:
    """Return every warning, its effect in columns of its own, and what it explains as JSON text."""
    kinds = {
        "id": "text", "kind": "text", "along": "text", "level": "text", "response": "text", "grade": "text",
        "state": "text", "raised_at": "text", "run": "text", "index": "integer", "n": "integer",
        "since": "integer", "since_low": "integer", "since_high": "integer", "log_e": "number",
        "threshold": "number", "evidence_loss": "number", "message": "text", "remedy": "text",
        "answer": "text",
    }  # fmt: skip
    effect = ("name", "value", "low", "high")
    columns = [Column(name, kind) for name, kind in kinds.items()]
    columns += [Column(f"effect.{name}", "text" if name == "name" else "number") for name in effect]
    columns.append(Column("with", "text"))

    def rows() -> Iterator[list[Any]]:
        for caution in stored_cautions(connection):
            document = caution_document(caution)
            shown = document["effect"] or dict.fromkeys(effect)
            explains = msgspec.json.encode(document["with"]).decode()
            yield [*(document[name] for name in kinds), *(shown[name] for name in effect), explains]

    return Table(columns=columns, rows=rows())


_TABLES: dict[What, Callable[[Connection, Plan], Table]] = {
    "runs": runs_table,
    "series": series_table,
    "warnings": warnings_table,
}
