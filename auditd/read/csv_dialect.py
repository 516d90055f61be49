"""A table's delimiter and header, read from its first line alone: what comes later never changes them."""

from __future__ import annotations

import csv

import msgspec

from auditd.errors import BadInput

DELIMITERS = (",", ";", "\t", "|")


class Head(msgspec.Struct, frozen=True):
    """What a reader needs to go on within a table."""

    delimiter: str
    names: list[str]


def read_head(line: str) -> Head:
    """Return the delimiter that stands most often outside quotes, and the names between them.

    Raises
    ------
    BadInput
        A name stands twice, or no name stands at all.
    """
    counts = {delimiter: _outside_quotes(line, delimiter) for delimiter in DELIMITERS}
    delimiter = max(DELIMITERS, key=lambda candidate: counts[candidate])
    try:
        names = next(csv.reader([line], delimiter=delimiter, strict=True), [])
    except csv.Error as error:
        raise BadInput(f"the header is no CSV: {error}") from None
    names = [name.strip() for name in names]
    stated = [name for name in names if name]
    if not stated:
        raise BadInput("the header names no column")
    twice = sorted({name for name in stated if stated.count(name) > 1})
    if twice:
        raise BadInput(f"the header names {twice[0]!r} twice; which of them is meant cannot be known")
    return Head(delimiter, names)


def _outside_quotes(line: str, delimiter: str) -> int:
    """Count a delimiter in the parts of a line that no quotes enclose."""
    return sum(part.count(delimiter) for part in line.split('"')[::2])


def encode_head(head: Head) -> bytes:
    """Return a head as bytes for `Source.context`."""
    return msgspec.json.encode(head)


def decode_head(context: bytes) -> Head:
    """Return what `encode_head` wrote."""
    return msgspec.json.decode(context, type=Head)
