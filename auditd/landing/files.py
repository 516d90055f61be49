"""One file at a time: whether it is settled, what it gives, and when to look at it again."""

from __future__ import annotations

import errno
import math
import os
import stat
from collections.abc import Iterator

import msgspec

from auditd.landing.area import Area
from auditd.landing.growing import Growing
from auditd.landing.identity import matches, start_of
from auditd.landing.pending import STILL_S, Pending
from auditd.landing.seen import Memory, Seen, from_source, to_source
from auditd.landing.taking import Step, Taking, open_result
from auditd.plan import Plan, duration_s
from auditd.read import Mapper, Reader, Readers
from auditd.records import Batch, Source

NO_FORMAT = "no format is known for this name; state landing.format"


class Progress(msgspec.Struct, kw_only=True):
    """Running totals of one Landing, for a progress bar; `n_found` is known before the first batch."""

    n_found: int = 0
    n_done: int = 0
    n_records: int = 0
    n_bytes: int = 0


class _Opened(msgspec.Struct, frozen=True, kw_only=True):
    """A file that is open for one look."""

    path: str
    descriptor: int
    status: os.stat_result
    seen: Seen | None
    pending: Pending
    reader: Reader | None
    now: float

    @property
    def shape(self) -> str:
        """Whether the file is a document or lines."""
        return "document" if self.reader is None else self.reader.shape


class Files:
    """Every file of a landing that was met: taken ones in `memory`, the others in `pending`.

    Parameters
    ----------
    plan, readers, area : of the landing.
    sources : what the store keeps of files taken earlier.
    settle_all : take what validates without waiting for it to settle.
    """

    def __init__(
        self, plan: Plan, readers: Readers, area: Area, sources: Iterator[Source], *, settle_all: bool
    ) -> None:
        self._readers, self._area, self._settle_all = readers, area, settle_all
        self._mapper = Mapper(plan)
        self._settle_s = duration_s(plan.landing.settle, "landing.settle")
        self.memory = Memory()
        self.pending: dict[str, Pending] = {}
        self.growing = Growing()
        self.progress = Progress()
        for source in sources:
            self.memory.put(source.path, from_source(source))
            reader = readers.of(source.path)
            if reader is not None and reader.shape == "lines":
                self.growing.note(source.path, source.mtime_ns / 1e9)

    def hint(self, path: str, now: float) -> None:
        """Note that a file was closed or renamed into place."""
        pending = self.pending.setdefault(path, Pending(first_seen=now, still_since=now))
        pending.hinted = True

    def look(self, path: str, now: float) -> Iterator[Batch]:
        """Give what one file has, if anything; an error of the filesystem is noted and backs off."""
        seen = self.memory.get(path)
        try:
            status = os.lstat(self._area.real(path))
            if seen is not None and seen.is_of(status) and seen.state != "growing":
                self.pending.pop(path, None)
                return
            if stat.S_ISREG(status.st_mode):
                yield from self._open(path, seen, now)
            else:
                self.pending.pop(path, None)
        except OSError as error:
            self._note(path, error, now)

    def _note(self, path: str, error: OSError, now: float) -> None:
        """Note an error; a file that is gone, or a link, is none, and what was taken stays taken."""
        if error.errno in {errno.ENOENT, errno.ENOTDIR, errno.ELOOP}:
            self.pending.pop(path, None)
            self.growing.drop(path)
            return
        self.pending.setdefault(path, Pending(first_seen=now, still_since=now)).fail(error, now)

    def _open(self, path: str, seen: Seen | None, now: float) -> Iterator[Batch]:
        pending = self.pending.setdefault(path, Pending(first_seen=now, still_since=now))
        opened = open_result(self._area.real(path))
        if opened is None:
            self.pending.pop(path, None)
            return
        descriptor, status = opened
        try:
            yield from self._judge(
                _Opened(
                    path=path,
                    descriptor=descriptor,
                    status=status,
                    seen=seen,
                    pending=pending,
                    reader=self._readers.of(path),
                    now=now,
                )
            )
        finally:
            os.close(descriptor)

    def _judge(self, file: _Opened) -> Iterator[Batch]:
        """Take a file that is settled and was not tried as it stands."""
        pending, status, now = file.pending, file.status, file.now
        still_s = math.inf if self._settle_all else pending.look(status, now)
        pending.n_errors = 0
        if file.shape == "document" and not pending.hinted and still_s < self._settle_s:
            pending.due = now + self._settle_s - max(0.0, still_s)
            return
        final = still_s >= STILL_S
        trial = (status.st_size, status.st_mtime_ns, status.st_ctime_ns, final)
        if trial == pending.tried:
            pending.wait_for(pending.why, now, self._settle_s)
            return
        moved = self._moved_from(file) if file.seen is None else None
        if moved is not None and _same_stretch(moved, status):
            yield from self._same(file, moved, change="new")
            return
        start = start_of(file.descriptor, status, file.seen or moved, file.shape)
        if start is None:
            yield from self._same(file, file.seen or moved, change="append")
            return
        taking = Taking(file.path, file.descriptor, status, start)
        if file.reader is None:
            steps = iter([taking.refused(NO_FORMAT)])
        else:
            steps = taking.steps(file.reader, self._mapper, final=final)
        yield from self._give(file, steps, trial, still_s)

    def _give(
        self, file: _Opened, steps: Iterator[Step], trial: tuple[int, int, int, bool], still_s: float
    ) -> Iterator[Batch]:
        """Give the batches, each remembered only once the next one is asked for."""
        waits = ""
        for step in steps:
            waits = step.waits
            if step.batch is not None:
                yield step.batch
                self.progress.n_records += len(step.batch.items)
                self.progress.n_bytes += max(
                    0, step.batch.source.offset - (file.seen.offset if file.seen else 0)
                )
                if file.shape == "lines":
                    self.growing.note(file.path, file.now)
            if step.seen is not None:
                self.memory.put(file.path, step.seen)
        if not waits:
            self.pending.pop(file.path, None)
            self.progress.n_done += 1
            return
        file.pending.tried = trial
        if file.shape == "lines":
            self.growing.note(file.path, file.now)
        until_still_s = STILL_S - still_s if file.shape == "lines" and still_s < STILL_S else 0.0
        file.pending.wait_for(waits, file.now, max(self._settle_s, until_still_s))

    def _same(self, file: _Opened, seen: Seen | None, change: str) -> Iterator[Batch]:
        """Give a batch without records: the content is what was taken, under another status or name."""
        status = file.status
        if seen is None:
            return
        now_seen = msgspec.structs.replace(
            seen,
            device=status.st_dev,
            inode=status.st_ino,
            size=status.st_size,
            mtime_ns=status.st_mtime_ns,
            ctime_ns=status.st_ctime_ns,
        )
        yield Batch(
            source=to_source(file.path, now_seen), items=(), change="new" if change == "new" else "append"
        )
        self.memory.put(file.path, now_seen)
        self.pending.pop(file.path, None)
        self.progress.n_done += 1
        if file.shape == "lines":
            self.growing.note(file.path, file.now)

    def _moved_from(self, file: _Opened) -> Seen | None:
        """Return what is known of a file that was moved here, or linked, from another path."""
        status = file.status
        other = self.memory.path_of(status.st_ino)
        seen = None if other is None else self.memory.get(other)
        if seen is None or seen.inode != status.st_ino or seen.offset == 0:
            return None
        grown = file.shape == "lines" and status.st_size >= seen.offset
        if (grown or _same_stretch(seen, status)) and matches(file.descriptor, seen):
            return seen
        return None


def _same_stretch(seen: Seen, status: os.stat_result) -> bool:
    return seen.size == status.st_size and seen.mtime_ns == status.st_mtime_ns
