"""Parquet tables, by pyarrow, which is an optional extra."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from datetime import date, datetime, time, timedelta
from decimal import Decimal
from typing import Any, Literal

from auditd.plan import Format
from auditd.read.raw import MAX_PORTION_RECORDS, Extent, Portion, Raw
from auditd.records import Refusal

_MAGIC = b"PAR1"
NO_EXTRA = 'reading Parquet needs pyarrow: install "auditd[parquet]"'


class ParquetReader:
    """Reads a table's rows by batches; the footer at the end says that the file is complete."""

    format: Format = "parquet"
    suffixes: tuple[str, ...] = (".parquet",)
    shape: Literal["lines", "document"] = "document"

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Yield the rows from `extent.number` on."""
        refusal = _check_ends(extent)
        if refusal is not None:
            yield refusal
            return
        try:
            import pyarrow.parquet
        except ImportError:
            yield Portion(items=[], offset=0, number=extent.number, failed=NO_EXTRA)
            return
        with os.fdopen(os.dup(extent.descriptor), "rb") as handle:
            try:
                yield from _rows(extent, pyarrow.parquet.ParquetFile(handle))
            except (pyarrow.ArrowException, ValueError, OSError, MemoryError) as error:
                reason = f"no Parquet table: {' '.join(str(error).split())[:200]}"
                yield Portion(items=[], offset=0, number=extent.number, failed=reason)


def _check_ends(extent: Extent) -> Portion | None:
    """Return what is wrong with the file's first and last bytes, if anything."""
    start = os.pread(extent.descriptor, 4, 0)
    if extent.size == 0 or not _MAGIC.startswith(start[:4]):
        failed = "no Parquet table: it does not begin with PAR1" if extent.size else ""
        waits = "" if failed else "the file is empty"
        return Portion(items=[], offset=0, number=extent.number, waits=waits, failed=failed)
    if extent.size < 12 or os.pread(extent.descriptor, 4, extent.size - 4) != _MAGIC:
        return Portion(items=[], offset=0, number=extent.number, waits="the footer is not there yet")
    return None


def _rows(extent: Extent, table: Any) -> Iterator[Portion]:
    """Yield the rows of a pyarrow ParquetFile by portions, passing over those taken before."""
    total, number, seen = table.metadata.num_rows, extent.number, 0
    for batch in table.iter_batches(batch_size=MAX_PORTION_RECORDS):
        skipped = min(batch.num_rows, max(0, number - seen))
        seen += batch.num_rows
        rows = batch.slice(skipped).to_pylist()
        if not rows:
            continue
        items = [_item(row, number + at) for at, row in enumerate(rows)]
        number += len(rows)
        yield Portion(items=items, offset=extent.size if number >= total else 0, number=number)
    if number >= total and extent.number >= total:
        yield Portion(items=[], offset=extent.size, number=number)


def _item(row: dict[str, Any], number: int) -> Raw | Refusal:
    """Return a row as JSON values; null is not stated."""
    value = {name: as_json(cell) for name, cell in row.items() if cell is not None}
    return Raw(value=value, offset=number, number=number)


def as_json(cell: Any) -> Any:
    """Return a cell as a JSON value: times as ISO 8601, intervals in seconds, bytes as text or hex."""
    if isinstance(cell, dict):
        return {str(name): as_json(inner) for name, inner in cell.items()}
    if isinstance(cell, (list, tuple)):
        return [as_json(inner) for inner in cell]
    return next((turn(cell) for kind, turn in _SCALARS if isinstance(cell, kind)), cell)


def _from_decimal(cell: Decimal) -> int | float:
    whole = cell.is_finite() and cell == cell.to_integral_value()
    return int(cell) if whole else float(cell)


def _from_bytes(cell: bytes) -> str:
    try:
        return cell.decode()
    except UnicodeDecodeError:
        return cell.hex()


_SCALARS: tuple[tuple[Any, Callable[[Any], Any]], ...] = (
    ((datetime, date, time), lambda cell: cell.isoformat()),
    (timedelta, lambda cell: cell.total_seconds()),
    (Decimal, _from_decimal),
    (bytes, _from_bytes),
)
