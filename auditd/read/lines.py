"""Whole lines of a growing file, by blocks of bounded size; a line over the limit is stepped over."""

from __future__ import annotations

import os

import msgspec

from auditd.read.raw import BLOCK_BYTES, MAX_RECORD_BYTES, Extent
from auditd.records import Refusal

_SEEK_BYTES = 1024 * 1024


class Block(msgspec.Struct, frozen=True, kw_only=True):
    """Whole lines from `offset` on; `rest` is a last line that has no newline yet.

    `stepped_over` is the length of a line over the limit that stands at `offset` (then `data` is empty).
    """

    offset: int
    data: bytes
    rest: bytes = b""
    stepped_over: int = 0


def read_bytes(descriptor: int, offset: int, end: int) -> bytes:
    """Return the bytes between two offsets, fewer only where the file is shorter by now."""
    data = os.pread(descriptor, end - offset, offset)
    if len(data) in {0, end - offset}:
        return data
    parts = [data]
    at = offset + len(data)
    while at < end:
        data = os.pread(descriptor, end - at, at)
        if not data:
            break
        parts.append(data)
        at += len(data)
    return b"".join(parts)


def read_block(extent: Extent, offset: int, block_bytes: int = BLOCK_BYTES) -> Block:
    """Return the next whole lines of a file."""
    for n_bytes in (block_bytes, MAX_RECORD_BYTES + 1):
        end = min(extent.size, offset + n_bytes)
        data = read_bytes(extent.descriptor, offset, end)
        cut = data.rfind(b"\n") + 1
        if cut:
            rest = data[cut:] if end == extent.size else b""
            return Block(offset=offset, data=data[:cut], rest=rest)
        if len(data) <= MAX_RECORD_BYTES and end == extent.size:
            return Block(offset=offset, data=b"", rest=data)
    return Block(offset=offset, data=b"", stepped_over=_length_of_line(extent, end) - offset)


def _length_of_line(extent: Extent, at: int) -> int:
    """Return the offset behind the line that holds byte `at`, or the end of the file."""
    while at < extent.size:
        data = os.pread(extent.descriptor, min(_SEEK_BYTES, extent.size - at), at)
        if not data:
            break
        found = data.find(b"\n")
        if found >= 0:
            return at + found + 1
        at += len(data)
    return extent.size


def refuse_long(extent: Extent, block: Block, number: int) -> Refusal:
    """Refuse a line over the limit."""
    reason = f"a line of {block.stepped_over} bytes; a record has at most {MAX_RECORD_BYTES}"
    return Refusal(path=extent.path, offset=block.offset, number=number, reason=reason, kind="read")
