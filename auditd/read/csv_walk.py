"""The records of a stretch of CSV, each with the byte offset at which it starts."""

from __future__ import annotations

import csv
from typing import NamedTuple

from auditd.read.cells import cell_value
from auditd.read.csv_dialect import Head
from auditd.read.raw import MAX_PORTION_RECORDS, MAX_RECORD_BYTES, Raw
from auditd.records import Refusal

csv.field_size_limit(MAX_RECORD_BYTES)
_OPEN_QUOTE = "unexpected end of data"
"""The csv module's words for a record whose quotes have not closed."""


class Walked(NamedTuple):
    """What a stretch gave, and where the next one starts; `opened`: its last record is not complete."""

    items: list[Raw | Refusal]
    offset: int
    number: int
    opened: bool = False


class _Feed:
    """Gives the csv module one line at a time, and knows how many bytes it has given."""

    def __init__(self, data: bytes) -> None:
        self.data = data
        self.at = 0
        self.complaint = ""

    def __iter__(self) -> _Feed:
        return self

    def __next__(self) -> str:
        if self.at >= len(self.data):
            raise StopIteration
        end = self.data.find(b"\n", self.at) + 1 or len(self.data)
        line = self.data[self.at : end]
        start, self.at = self.at, end
        try:
            text = line.decode()
        except UnicodeDecodeError as error:
            self.complaint = f"not UTF-8 at byte {start + error.start} of the stretch"
            return line.decode(errors="replace")
        if "\0" in text:
            self.complaint = "a NUL byte within text"
        return text


def walk(path: str, head: Head, data: bytes, offset: int, number: int) -> Walked:
    """Read up to a portion's worth of records from bytes that begin at a record."""
    feed, items = _Feed(data), list[Raw | Refusal]()
    rows = csv.reader(feed, delimiter=head.delimiter, strict=True)
    while len(items) < MAX_PORTION_RECORDS:
        start, feed.complaint = feed.at, ""
        try:
            row = next(rows)
        except StopIteration:
            break
        except csv.Error as error:
            if str(error) == _OPEN_QUOTE:
                return Walked(items, offset + start, number, opened=True)
            feed.complaint = feed.complaint or f"no CSV: {error}"
            rows, row = csv.reader(feed, delimiter=head.delimiter, strict=True), [""]
        if row:
            items.append(_record(path, head, row, feed.complaint, offset + start, number))
            number += 1
    return Walked(items, offset + feed.at, number)


def _record(path: str, head: Head, row: list[str], complaint: str, offset: int, number: int) -> Raw | Refusal:
    """Name a row's cells; an empty cell is not stated."""
    if not complaint and len(row) != len(head.names):
        complaint = f"{len(row)} cells where the header names {len(head.names)}"
    if complaint:
        return Refusal(path=path, offset=offset, number=number, reason=complaint, kind="read")
    written = {name: text for name, text in zip(head.names, row, strict=True) if text and name}
    value = {name: cell_value(text) for name, text in written.items()}
    return Raw(value=value, offset=offset, number=number, written=written)
