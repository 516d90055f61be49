"""CSV and TSV after RFC 4180: one run a record, which may span lines within quotes."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal

from auditd.errors import BadInput
from auditd.plan import Format
from auditd.read.csv_dialect import Head, decode_head, encode_head, read_head
from auditd.read.csv_walk import Walked, walk
from auditd.read.json_text import BOM
from auditd.read.lines import Block, read_block, refuse_long
from auditd.read.raw import BLOCK_BYTES, MAX_RECORD_BYTES, Extent, Portion, Raw
from auditd.records import Refusal


class CsvReader:
    """Reads whole records; the delimiter and the header come from the first line."""

    format: Format = "csv"
    suffixes: tuple[str, ...] = (".csv", ".tsv")
    shape: Literal["lines", "document"] = "lines"

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Yield the records from `extent.offset` on."""
        offset, context = extent.offset, extent.context
        if not context:
            start = _read_header(extent)
            if isinstance(start, Portion):
                yield start
                return
            offset, context = start
        yield from _records(extent, decode_head(context), offset, context)


def _read_header(extent: Extent) -> tuple[int, bytes] | Portion:
    """Return the offset behind the header and the context, or the portion that says why not."""
    block = read_block(extent, 0)
    line = block.data[: block.data.find(b"\n") + 1] or (block.rest if extent.final else b"")
    if not block.data and b"\r" in block.rest[:-1]:
        return Portion(
            items=[], offset=0, number=0, failed="lines end in bare carriage returns; write newlines"
        )
    if not line or not line.removeprefix(BOM).strip():
        waits = "the file is empty" if extent.size == 0 else "the header is not complete yet"
        if block.data:
            return Portion(items=[], offset=0, number=0, failed="the header names no column")
        return Portion(items=[], offset=0, number=0, waits=waits)
    try:
        head = read_head(line.removeprefix(BOM).decode().rstrip("\r\n"))
    except UnicodeDecodeError as error:
        return Portion(items=[], offset=0, number=0, failed=f"not UTF-8 at byte {error.start} of the header")
    except BadInput as error:
        return Portion(items=[], offset=0, number=0, failed=str(error))
    return len(line), encode_head(head)


def _records(extent: Extent, head: Head, offset: int, context: bytes) -> Iterator[Portion]:
    """Yield portions until the file ends or a record is not complete."""
    number, block_bytes = extent.number, BLOCK_BYTES
    while True:
        block = read_block(extent, offset, block_bytes)
        walked = _step(extent, head, block, offset, number)
        stuck = walked.opened and not walked.items
        if stuck and len(block.data) + len(block.rest) > MAX_RECORD_BYTES:
            walked = _refuse_first_line(extent.path, block, number)
        elif stuck and not _reaches_end(extent, block):
            block_bytes = MAX_RECORD_BYTES + 2
            continue
        offset, number, block_bytes = walked.offset, walked.number, BLOCK_BYTES
        tail = block.data[offset - block.offset :] + block.rest
        if _reaches_end(extent, block) and (walked.opened or tail == block.rest or not tail):
            yield _last(extent, head, walked, tail, context)
            return
        yield Portion(items=walked.items, offset=offset, number=number, context=context)


def _reaches_end(extent: Extent, block: Block) -> bool:
    return block.offset + len(block.data) + len(block.rest) + block.stepped_over >= extent.size


def _step(extent: Extent, head: Head, block: Block, offset: int, number: int) -> Walked:
    """Read a block's records, or step over the one line that is too long."""
    if block.stepped_over:
        refusal = refuse_long(extent, block, number)
        return Walked([refusal], offset + block.stepped_over, number + 1)
    return walk(extent.path, head, block.data, offset, number)


def _refuse_first_line(path: str, block: Block, number: int) -> Walked:
    """Give up a record whose quote does not close within the limit: its first line is refused."""
    reason = f"a quote does not close within {MAX_RECORD_BYTES} bytes"
    refusal = Refusal(path=path, offset=block.offset, number=number, reason=reason, kind="read")
    return Walked([refusal], block.offset + block.data.find(b"\n") + 1, number + 1)


def _last(extent: Extent, head: Head, walked: Walked, tail: bytes, context: bytes) -> Portion:
    """End the reading: take the last line if it validates by itself, or say that it waits."""
    waits = ""
    if tail.strip() and not extent.final:
        opened = f"the quote that opens in the record at byte {walked.offset} has not closed yet"
        waits = opened if walked.opened else "the last line has no newline yet"
    elif tail.strip():
        final = walk(extent.path, head, tail, walked.offset, walked.number)
        if final.opened or not isinstance(final.items[-1], Raw):
            waits = "the last line has no newline, and is no record by itself"
        else:
            walked = Walked(walked.items + final.items, final.offset, final.number)
    return Portion(
        items=walked.items, offset=walked.offset, number=walked.number, context=context, waits=waits
    )
