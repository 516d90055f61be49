"""What tells append, truncation, rotation and rewriting apart: hashes of a file's head and tail."""

from __future__ import annotations

import hashlib
import os
from typing import Literal

import msgspec

from auditd.landing.seen import Seen
from auditd.read.lines import read_bytes

HEAD_BYTES = 64 * 1024
"""The head that is hashed; a smaller document is thereby compared wholly."""
TAIL_BYTES = 4 * 1024
"""The tail that is hashed, up to the offset: what a rewritten file hardly ever keeps."""
Change = Literal["new", "append", "truncated", "rotated", "rewritten"]


class Start(msgspec.Struct, frozen=True, kw_only=True):
    """From where a file is read, and what had happened to it; `refusal` is a hash of why it was refused."""

    change: Change
    offset: int = 0
    number: int = 0
    context: bytes = b""
    generation: int = 0
    first: bytes = b""
    refusal: bytes = b""

    @property
    def may_be_another(self) -> bool:
        """Whether another file may have taken the path, so that its runs are new ones."""
        return self.change in {"truncated", "rotated"}


def hash_of(data: bytes) -> bytes:
    """Return 16 bytes that identify a stretch of a file."""
    return hashlib.blake2b(data, digest_size=16).digest()


def head_and_tail(descriptor: int, offset: int) -> tuple[int, bytes, bytes]:
    """Return the length of the head, its hash, and the hash of the tail, of what lies before an offset."""
    n_head = min(offset, HEAD_BYTES)
    head = hash_of(read_bytes(descriptor, 0, n_head))
    return n_head, head, hash_of(read_bytes(descriptor, max(0, offset - TAIL_BYTES), offset))


def matches(descriptor: int, seen: Seen) -> bool:
    """Whether a file's head and tail are still those that were taken."""
    if seen.offset == 0:
        return True
    return head_and_tail(descriptor, seen.offset) == (seen.n_head, seen.head, seen.tail)


def start_of(descriptor: int, status: os.stat_result, seen: Seen | None, shape: str) -> Start | None:
    """Return from where to read; None where the content is what was taken, under another status."""
    if seen is None:
        return Start(change="new")
    if shape == "document":
        return _start_of_document(descriptor, status, seen)
    return _start_of_lines(descriptor, status, seen)


def _start_of_document(descriptor: int, status: os.stat_result, seen: Seen) -> Start | None:
    if seen.state == "growing" and seen.is_of(status):
        return Start(change="append", number=seen.n_records, generation=seen.generation, first=seen.first)
    whole = seen.offset == seen.size == status.st_size <= HEAD_BYTES
    if whole and matches(descriptor, seen):
        return None
    return _again("rewritten", seen)


def _again(change: Change, seen: Seen) -> Start:
    """Read a file from its beginning once more."""
    refusal = seen.tail if seen.state == "refused" else b""
    return Start(change=change, generation=seen.generation, first=seen.first, refusal=refusal)


def _start_of_lines(descriptor: int, status: os.stat_result, seen: Seen) -> Start | None:
    same_file = seen.inode == status.st_ino
    change: Change = "append"
    begins_anew = seen.offset == 0 and seen.first != b""  # it had been emptied
    if status.st_size < seen.offset or begins_anew:
        change = "truncated" if same_file else "rotated"
    elif not matches(descriptor, seen):
        change = "rewritten" if same_file else "rotated"
    elif _goes_on_within_line(descriptor, seen.offset) or _rewritten_unseen(status, seen):
        change = "rewritten"
    if change != "append" or seen.state == "refused":
        return _again("rewritten" if change == "append" else change, seen)
    if status.st_size == seen.offset:
        return None
    return Start(
        change="append",
        offset=seen.offset,
        number=seen.n_records,
        context=seen.context,
        generation=seen.generation,
        first=seen.first,
    )


def _goes_on_within_line(descriptor: int, offset: int) -> bool:
    """Whether a last line that was taken without its newline has been written on since."""
    around = os.pread(descriptor, 2, offset - 1) if offset else b""
    return len(around) == 2 and around[:1] != b"\n" and around[1:] not in {b"\n", b"\r"}


def _rewritten_unseen(status: os.stat_result, seen: Seen) -> bool:
    """Whether size and mtime are the same but the file was touched, and no hash covers its middle."""
    if seen.offset <= HEAD_BYTES + TAIL_BYTES or seen.ctime_ns in {-1, status.st_ctime_ns}:
        return False
    return seen.size == status.st_size and seen.mtime_ns == status.st_mtime_ns
