"""One open file, from where it was left off, to batches of runs and refusals."""

from __future__ import annotations

import os
import stat
from collections.abc import Iterator

import msgspec

from auditd.landing.identity import Change, Start, hash_of, head_and_tail
from auditd.landing.seen import Seen, to_source
from auditd.read import Extent, Mapper, Portion, Reader
from auditd.records import Batch, Refusal, Run

_OPEN = os.O_RDONLY | os.O_CLOEXEC | os.O_NOFOLLOW | os.O_NONBLOCK


class Step(msgspec.Struct, frozen=True, kw_only=True):
    """One step of taking a file; `batch` is None where nothing could be taken."""

    batch: Batch | None
    seen: Seen | None
    waits: str = ""


def open_result(path: str) -> tuple[int, os.stat_result] | None:
    """Open a result file; None for what is no regular file (links are not followed).

    Raises
    ------
    OSError
        It cannot be opened.
    """
    descriptor = os.open(path, _OPEN)
    status = os.fstat(descriptor)
    if stat.S_ISREG(status.st_mode):
        return descriptor, status
    os.close(descriptor)
    return None


def seen_of(status: os.stat_result, **fields: object) -> Seen:
    """Return what is remembered of a file with this status."""
    return Seen(
        device=status.st_dev,
        inode=status.st_ino,
        size=status.st_size,
        mtime_ns=status.st_mtime_ns,
        ctime_ns=status.st_ctime_ns,
        **fields,  # type: ignore[arg-type]
    )


class Taking:
    """Reads one open file on.

    Parameters
    ----------
    path : the path as stored.
    descriptor, status : the open file, and its status when it was opened.
    start : from where, and what had happened to the file.
    """

    def __init__(self, path: str, descriptor: int, status: os.stat_result, start: Start) -> None:
        self._path, self._descriptor, self._status, self._start = path, descriptor, status, start
        self._generation, self._first = start.generation, start.first
        self._fresh = start.change != "append"

    def steps(self, reader: Reader, mapper: Mapper, *, final: bool) -> Iterator[Step]:
        """Yield what the file gives, a batch a portion.

        Raises
        ------
        OSError
            The file cannot be read.
        """
        start, change = self._start, self._start.change
        extent = Extent(
            descriptor=self._descriptor,
            path=self._path,
            size=self._status.st_size,
            offset=start.offset,
            number=start.number,
            context=start.context,
            final=final,
        )
        for portion in _guarded(reader, extent):
            if reader.shape == "document" and self._moved_on():
                yield Step(batch=None, seen=None, waits="it changed while it was read")
                return
            if portion.failed:
                yield self.refused(portion.failed)
                return
            if portion.waits and reader.shape == "document":
                yield Step(batch=None, seen=None, waits=portion.waits)
                return
            yield self._step(portion, mapper, change)
            change = "append"

    def refused(self, reason: str) -> Step:
        """Refuse the file as a whole, once for one reason; it is read again when it changes."""
        mark = hash_of(reason.encode())
        seen = seen_of(
            self._status, state="refused", generation=self._generation, first=self._first, tail=mark
        )
        if mark == self._start.refusal:
            return Step(batch=None, seen=seen)
        refusal = Refusal(path=self._path, offset=0, number=0, reason=reason, kind="file")
        batch = Batch(source=to_source(self._path, seen), items=(refusal,), change=self._start.change)
        return Step(batch=batch, seen=seen)

    def _step(self, portion: Portion, mapper: Mapper, change: Change) -> Step:
        items = self._mapped(portion, mapper)
        n_head, head, tail = head_and_tail(self._descriptor, portion.offset)
        seen = seen_of(
            self._status,
            offset=portion.offset,
            n_records=portion.number,
            n_head=n_head,
            head=head,
            tail=tail,
            state="taken" if portion.offset == self._status.st_size else "growing",
            generation=self._generation,
            first=self._first,
            context=portion.context,
        )
        if not items and portion.offset == self._start.offset:
            if change == "append":
                return Step(batch=None, seen=seen, waits=portion.waits)
            if change == "new" and portion.waits:
                return Step(batch=None, seen=None, waits=portion.waits)
        batch = Batch(source=to_source(self._path, seen), items=items, change=change)
        return Step(batch=batch, seen=seen, waits=portion.waits)

    def _mapped(self, portion: Portion, mapper: Mapper) -> tuple[Run | Refusal, ...]:
        """Map a portion; the first run tells whether another file has taken the path."""
        items = self._map_all(portion, mapper)
        first = next((item.digest for item in items if isinstance(item, Run)), None)
        if not self._fresh or first is None:
            return items
        self._fresh = False
        another = self._start.may_be_another and self._first not in {b"", first}
        self._first = first
        if not another:
            return items
        self._generation += 1
        return self._map_all(portion, mapper)

    def _map_all(self, portion: Portion, mapper: Mapper) -> tuple[Run | Refusal, ...]:
        path, generation = self._path, self._generation
        return tuple([mapper.map(raw, path=path, generation=generation) for raw in portion.items])

    def _moved_on(self) -> bool:
        """Whether the file was written to since it was opened."""
        status = os.fstat(self._descriptor)
        return (status.st_size, status.st_mtime_ns) != (self._status.st_size, self._status.st_mtime_ns)


def _guarded(reader: Reader, extent: Extent) -> Iterator[Portion]:
    """Read, and turn what no reader foresaw into a refusal of this one file."""
    portions = reader.read(extent)
    while True:
        try:
            portion = next(portions, None)
        except OSError:
            raise
        except Exception as error:  # noqa: BLE001 - one file never stops the others
            reason = f"cannot be read: {type(error).__name__}: {error}"[:500]
            portion = Portion(items=[], offset=extent.offset, number=extent.number, failed=reason)
            portions = iter(())
        if portion is None:
            return
        yield portion
