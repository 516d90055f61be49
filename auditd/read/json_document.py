"""A JSON file: one run, or an array of runs."""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import Any, Literal

import msgspec

from auditd.plan import Format
from auditd.read.json_text import BOM, NotJson, decode_json, depth_exceeds
from auditd.read.lines import read_bytes
from auditd.read.raw import (
    MAX_DEPTH,
    MAX_DOCUMENT_BYTES,
    MAX_PORTION_RECORDS,
    MAX_RECORD_BYTES,
    Extent,
    Portion,
    Raw,
)
from auditd.records import Refusal

_split = msgspec.json.Decoder(list[msgspec.Raw]).decode
_PEEK_BYTES = 4096
TOO_BIG = f"a record over {MAX_RECORD_BYTES // 2**20} MiB"


class JsonReader:
    """Reads a document whole; its records' offsets are their numbers."""

    format: Format = "json"
    suffixes: tuple[str, ...] = (".json",)
    shape: Literal["lines", "document"] = "document"

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Yield the document's records from `extent.number` on."""
        try:
            yield from _portions(extent)
        except NotJson as error:
            yield _nothing(extent, error)


def _portions(extent: Extent) -> Iterator[Portion]:
    records = _records(extent)
    number, total = extent.number, len(records)
    while True:
        last = min(number + MAX_PORTION_RECORDS, total)
        items = [_item(records[at], extent.path, at) for at in range(number, last)]
        done = last >= total
        yield Portion(items=items, offset=extent.size if done else 0, number=last)
        if done:
            return
        number = last


def _nothing(extent: Extent, error: NotJson) -> Portion:
    """Say that a half document waits, and that one which can never be read is refused."""
    reason = str(error)
    return Portion(
        items=[],
        offset=0,
        number=extent.number,
        waits=reason if error.half else "",
        failed="" if error.half else reason,
    )


def _records(extent: Extent) -> list[Any]:
    """Return the document's records: undecoded slices where it is strict JSON, else values."""
    if extent.size == 0:
        raise NotJson("the file is empty", half=True)
    _check_size(extent)
    data = read_bytes(extent.descriptor, 0, extent.size)
    data = data.removeprefix(BOM)
    if not data.lstrip().startswith(b"["):
        return [data]
    try:
        return _split(data)
    except (msgspec.DecodeError, RecursionError):
        value = decode_json(data)
    return value if isinstance(value, list) else [value]


def _check_size(extent: Extent) -> None:
    if extent.size > MAX_DOCUMENT_BYTES:
        limit = MAX_DOCUMENT_BYTES // 2**20
        raise NotJson(f"a document over {limit} MiB; write one run a line (.ndjson) instead")
    start = os.pread(extent.descriptor, _PEEK_BYTES, 0).removeprefix(BOM).lstrip()
    if extent.size > MAX_RECORD_BYTES and not start.startswith(b"["):
        raise NotJson(TOO_BIG)


def _item(record: Any, path: str, number: int) -> Raw | Refusal:
    """Decode one record, or say why it is none."""
    try:
        value = _value(record)
    except NotJson as error:
        if number == 0 and isinstance(record, bytes):
            raise
        return Refusal(path=path, offset=number, number=number, reason=str(error), kind="read")
    if isinstance(value, dict):
        return Raw(value=value, offset=number, number=number)
    reason = f"a run is a JSON object, here stands {kind_of(value)}"
    return Refusal(path=path, offset=number, number=number, reason=reason, kind="read")


def _value(record: Any) -> Any:
    if isinstance(record, (bytes, msgspec.Raw)):
        data = bytes(record)
        if len(data) > MAX_RECORD_BYTES:
            raise NotJson(TOO_BIG)
        return decode_json(data)
    if depth_exceeds(record, MAX_DEPTH):
        raise NotJson(f"nested deeper than {MAX_DEPTH}")
    return record


def kind_of(value: Any) -> str:
    """Name the JSON type of a value, for a message."""
    names = {dict: "an object", list: "an array", str: "a text", bool: "true or false", type(None): "null"}
    return names.get(type(value), "a number")
