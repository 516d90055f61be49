"""Rows as CSV, JSON or Parquet. Numbers are exact: the shortest text that reads back the same."""

from __future__ import annotations

import csv
import io
import itertools
import math
from collections.abc import Callable, Iterable
from datetime import datetime
from typing import Any, Literal, NamedTuple, Protocol

import msgspec

from auditd.errors import BadInput
from auditd.records import level_label
from auditd.store.clock import rfc3339

Format = Literal["csv", "json", "parquet"]
FORMATS: tuple[Format, ...] = ("csv", "json", "parquet")
N_ROWS_A_GROUP = 50_000
"""Rows of a Parquet row group, to bound memory."""
FORMULA_SIGNS = ("=", "+", "-", "@", "\t", "\r")
"""Signs with which a spreadsheet takes a text for a formula (OWASP, CSV Injection)."""


class Column(NamedTuple):
    """A column's name and kind: text, integer, number, flag, time or level (any JSON value)."""

    name: str
    kind: str


class Table(NamedTuple):
    """Columns, and rows of as many values."""

    columns: list[Column]
    rows: Iterable[list[Any]]  # values of the columns' kinds, None where nothing is stated


class Sink(Protocol):
    """Where bytes go."""

    def write(self, data: bytes, /) -> Any:
        """Write bytes."""


def write_csv(_what: str, table: Table, sink: Sink) -> int:
    """Write CSV after RFC 4180: a header, commas, CRLF, quotes where needed, UTF-8.

    A text that a spreadsheet would take for a formula gets an apostrophe in front; numbers never do. NaN and
    infinities are written as nan, inf and -inf.
    """
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([column.name for column in table.columns])
    n = 0
    for row in table.rows:
        writer.writerow([_cell(column.kind, value) for column, value in zip(table.columns, row, strict=True)])
        n += 1
        if n % 1000 == 0:
            _drain(text, sink)
    _drain(text, sink)
    return n


def _drain(text: io.StringIO, sink: Sink) -> None:
    sink.write(text.getvalue().encode("utf-8", "backslashreplace"))
    text.seek(0)
    text.truncate()


def _cell(kind: str, value: Any) -> str:  # a value of the column's kind
    if value is None:
        return ""
    if kind == "flag":
        return "true" if value else "false"
    if kind == "time":
        return rfc3339(value) or ""
    if kind in {"integer", "number"}:
        return repr(value)
    return harmless(level_label(value) if kind == "level" and not isinstance(value, str) else str(value))


def harmless(text: str) -> str:
    """Return a text that no spreadsheet takes for a formula; a number stays as it is."""
    if not text.startswith(FORMULA_SIGNS):
        return text
    try:
        float(text)
    except ValueError:
        return f"'{text}"
    return text


def write_json(what: str, table: Table, sink: Sink) -> int:
    """Write one JSON document; NaN and infinities, which JSON has not, are null."""
    sink.write(f'{{"schema":1,"{what}":['.encode())
    names = [column.name for column in table.columns]
    n = 0
    for row in table.rows:
        values = [_plain(value) for value in row]
        sink.write((b",\n" if n else b"\n") + msgspec.json.encode(dict(zip(names, values, strict=True))))
        n += 1
    sink.write(b"\n]}\n")
    return n


def _plain(value: Any) -> Any:  # a value of any kind, for JSON
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return rfc3339(value) if isinstance(value, datetime) else value


def write_parquet(_what: str, table: Table, sink: Sink) -> int:
    """Write Parquet; levels are text as the command line shows them."""
    try:
        import pyarrow as pa
        from pyarrow import parquet
    except ImportError as error:
        raise BadInput(
            "Parquet needs pyarrow: pip install 'auditd[parquet]', or choose csv or json"
        ) from error
    kinds = {
        "text": pa.string(),
        "level": pa.string(),
        "integer": pa.int64(),
        "number": pa.float64(),
        "flag": pa.bool_(),
        "time": pa.timestamp("us", tz="UTC"),
    }
    schema = pa.schema([(column.name, kinds[column.kind]) for column in table.columns])
    n = 0
    rows = iter(table.rows)
    with parquet.ParquetWriter(sink, schema) as writer:
        while group := list(itertools.islice(rows, N_ROWS_A_GROUP)):
            arrays = [
                pa.array([_typed(column.kind, row[k]) for row in group], kinds[column.kind])
                for k, column in enumerate(table.columns)
            ]
            writer.write_table(pa.Table.from_arrays(arrays, schema=schema))
            n += len(group)
    return n


def _typed(kind: str, value: Any) -> Any:  # a value of the column's kind
    return level_label(value) if kind == "level" and value is not None else value


WRITERS: dict[Format, Callable[[str, Table, Sink], int]] = {
    "csv": write_csv,
    "json": write_json,
    "parquet": write_parquet,
}
