"""NDJSON: one run a line."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal

from auditd.plan import Format
from auditd.read.json_document import kind_of
from auditd.read.json_text import BOM, NotJson, decode_json
from auditd.read.lines import read_block, refuse_long
from auditd.read.raw import MAX_PORTION_RECORDS, Extent, Portion, Raw
from auditd.records import Refusal


class NdjsonReader:
    """Reads whole lines; blank ones are passed over."""

    format: Format = "ndjson"
    suffixes: tuple[str, ...] = (".ndjson", ".jsonl")
    shape: Literal["lines", "document"] = "lines"

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Yield the records from `extent.offset` on."""
        offset, number = extent.offset, extent.number
        while True:
            block = read_block(extent, offset)
            if block.stepped_over:
                items: list[Raw | Refusal] = [refuse_long(extent, block, number)]
                offset, number = offset + block.stepped_over, number + 1
            else:
                items, offset, number = _whole_lines(extent.path, block.data, offset, number)
            done = offset == block.offset + len(block.data) and bool(block.rest or not block.data)
            if offset >= extent.size or done:
                yield _last(extent, block.rest, items, offset, number)
                return
            yield Portion(items=items, offset=offset, number=number)


def _whole_lines(path: str, data: bytes, offset: int, number: int) -> tuple[list[Raw | Refusal], int, int]:
    """Decode up to a portion's worth of lines; return them with the next offset and number."""
    items: list[Raw | Refusal] = []
    lines = data.split(b"\n", MAX_PORTION_RECORDS)
    lines.pop()
    for line in lines:
        if line and not line.isspace():
            items.append(read_line(path, line, offset, number))
            number += 1
        offset += len(line) + 1
    return items, offset, number


def read_line(path: str, line: bytes, offset: int, number: int) -> Raw | Refusal:
    """Decode one line."""
    try:
        value = decode_json(line)
    except NotJson as error:
        return Refusal(path=path, offset=offset, number=number, reason=str(error), kind="read")
    if isinstance(value, dict):
        return Raw(value=value, offset=offset, number=number)
    reason = f"a run is a JSON object, here stands {kind_of(value)}"
    return Refusal(path=path, offset=offset, number=number, reason=reason, kind="read")


def _last(extent: Extent, rest: bytes, items: list[Raw | Refusal], offset: int, number: int) -> Portion:
    """End the reading: take the rest if it validates by itself, or say that it waits."""
    waits = ""
    if rest.isspace() or rest == BOM:
        rest = b""
    if rest and not extent.final:
        waits = "the last line has no newline yet"
    elif rest:
        try:
            decode_json(rest)
            half = False
        except NotJson as error:
            half = error.half
        if half:
            waits = "the last line has no newline, and is no record by itself"
        else:
            items.append(read_line(extent.path, rest, offset, number))
            offset, number = offset + len(rest), number + 1
    return Portion(items=items, offset=offset, number=number, waits=waits)
