"""Free text with a pattern: one run a line that matches, named groups as its fields."""

from __future__ import annotations

import re
from collections.abc import Iterator
from typing import Literal

from auditd.plan import Format
from auditd.read.cells import cell_value
from auditd.read.json_text import BOM
from auditd.read.lines import Block, read_block, refuse_long
from auditd.read.raw import MAX_PORTION_RECORDS, Extent, Portion, Raw
from auditd.records import Refusal


class TextReader:
    """Reads whole lines; those that do not match are no records.

    Parameters
    ----------
    pattern : a regular expression with named groups, searched in each line.
    """

    format: Format = "text"
    suffixes: tuple[str, ...] = (".txt", ".log")
    shape: Literal["lines", "document"] = "lines"

    def __init__(self, pattern: str) -> None:
        self._search = re.compile(pattern).search

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Yield the records from `extent.offset` on."""
        offset, number = extent.offset, extent.number
        while True:
            block = read_block(extent, offset)
            items: list[Raw | Refusal] = []
            if block.stepped_over:
                items.append(refuse_long(extent, block, number))
                offset, number = offset + block.stepped_over, number + 1
            else:
                offset = self._take(extent.path, block, items, number)
                number += len(items)
            behind = block.offset + len(block.data) + block.stepped_over
            if offset == behind and behind + len(block.rest) >= extent.size:
                yield self._last(extent, block.rest, items, offset, number)
                return
            yield Portion(items=items, offset=offset, number=number)

    def _take(self, path: str, block: Block, items: list[Raw | Refusal], number: int) -> int:
        """Append the records of a block's lines, and return the offset behind the last line read."""
        offset = block.offset
        lines = block.data.split(b"\n", MAX_PORTION_RECORDS)
        lines.pop()
        for line in lines:
            item = self._line(path, line, offset, number + len(items))
            if item is not None:
                items.append(item)
            offset += len(line) + 1
        return offset

    def _line(self, path: str, line: bytes, offset: int, number: int) -> Raw | Refusal | None:
        """Return the record that a line holds; bytes that are not UTF-8 or NUL refuse it if it matches."""
        text, bad = _decoded(line.removeprefix(BOM))
        match = self._search(text)
        if match is None:
            return None
        if bad or "\0" in text:
            reason = "a NUL byte or bytes that are not UTF-8 within the line"
            return Refusal(path=path, offset=offset, number=number, reason=reason, kind="read")
        written = {name: group for name, group in match.groupdict().items() if group}
        value = {name: cell_value(group) for name, group in written.items()}
        return Raw(value=value, offset=offset, number=number, written=written)

    def _last(
        self, extent: Extent, rest: bytes, items: list[Raw | Refusal], offset: int, number: int
    ) -> Portion:
        """End the reading; with `final` the last line is read like any other."""
        if rest and not extent.final:
            waits = "the last line has no newline yet"
            return Portion(items=items, offset=offset, number=number, waits=waits)
        item = self._line(extent.path, rest, offset, number) if rest else None
        if item is not None:
            items.append(item)
            number += 1
        return Portion(items=items, offset=offset + len(rest), number=number)


def _decoded(line: bytes) -> tuple[str, bool]:
    """Return a line's text, and whether some of its bytes are not UTF-8."""
    try:
        return line.decode().rstrip("\r"), False
    except UnicodeDecodeError:
        return line.decode(errors="replace").rstrip("\r"), True
