"""What passes between files, readers and the mapper, and the limits that every reader keeps."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any, Literal, Protocol

import msgspec

from auditd.plan import Format
from auditd.records import Refusal

MAX_RECORD_BYTES = 16 * 1024 * 1024
"""A longer record is refused (design.md, section 5)."""
MAX_DEPTH = 64
"""A record nested deeper is refused (design.md, section 5)."""
MAX_PORTION_RECORDS = 20_000
"""A portion holds at most so many records, so that the store can commit in between."""
MAX_DOCUMENT_BYTES = 256 * 1024 * 1024
"""A document is held in memory as a whole; a larger one is refused with the advice to write lines."""
BLOCK_BYTES = 4 * 1024 * 1024
"""Line formats are read by blocks of this size; a longer line makes the block grow to one record's limit."""


class Raw(msgspec.Struct, frozen=True, kw_only=True, gc=False):
    """One record as read, before the plan says what it means.

    `offset` is the byte offset in a file of lines, the record's number in a file that is one document.
    `written` holds the cells of a table or the groups of a pattern as they were written, since a number's
    text (`0.10`, a seed of 40 digits) may be an id; it is None for formats that have types of their own.
    """

    value: dict[str, Any]  # any JSON object
    offset: int
    number: int
    written: dict[str, str] | None = None


class Extent(msgspec.Struct, frozen=True, kw_only=True):
    """The part of an open file that is to be read: from `offset` to `size`.

    `number` is the next record's number, `context` what the reader gave back last time. With `final` a
    last line without its newline may be taken, if it validates by itself.
    """

    descriptor: int
    path: str
    size: int
    offset: int = 0
    number: int = 0
    context: bytes = b""
    final: bool = False


class Portion(msgspec.Struct, frozen=True, kw_only=True):
    """What one step of reading gave.

    `offset`, `number` and `context` go into the next `Extent`. `waits` says in words why the rest is not
    taken yet (empty when there is none). `failed` is the reason why the file as a whole is refused.
    """

    items: list[Raw | Refusal]
    offset: int
    number: int
    context: bytes = b""
    waits: str = ""
    failed: str = ""


class Reader(Protocol):
    """Turns the bytes of one file into raw records; never raises for what the bytes hold."""

    format: Format
    suffixes: tuple[str, ...]
    shape: Literal["lines", "document"]
    """A file of lines may grow and is continued from an offset; a document is read whole."""

    def read(self, extent: Extent) -> Iterator[Portion]:
        """Read on from `extent.offset`, by portions of at most MAX_PORTION_RECORDS records.

        Whoever reads may stop after any portion, and go on later from what it says.

        Raises
        ------
        OSError
            The file cannot be read; what stands in it never raises.
        """
        ...
