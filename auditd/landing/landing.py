"""Which files have landed and are settled, and from which offset they are to be read."""

from __future__ import annotations

import contextlib
import math
import os
import time
from collections.abc import Iterable, Iterator

import msgspec

from auditd.landing.area import Area
from auditd.landing.files import Files, Progress
from auditd.landing.pace import ROTATION_S, Pace
from auditd.plan import Plan
from auditd.read import Readers
from auditd.records import Batch, Source

_QUEUED_S = 5.0
"""An event may wait for so long in queues before it is told."""


class Waiting(msgspec.Struct, frozen=True, kw_only=True):
    """A file that is not taken, or not wholly, since when and why."""

    path: str
    age_s: float
    why: str


class Landing:
    """The files of a plan's landing, what is taken of them, and what is due.

    A batch counts as taken once the next one is asked for (or the iteration has ended): if the store
    fails to commit, break off the iteration, and the next scan gives the batch again. A batch without
    items only moves a source: the file was renamed, touched or put back.

    A file that was truncated, rotated or rewritten is given once more from its beginning. Runs that are
    stored under the same id with the same digest are then no news; the same id with another digest is a
    `rewrite`. Offsets are those of the file as it is now, so an offset alone never identifies a run.

    Parameters
    ----------
    plan : Plan
    sources : the sources that the store keeps, from earlier sessions.
    settle_all : take what is there and validates without waiting for it to settle (`gather`).

    Attributes
    ----------
    area : Area, the folders that belong to the landing.
    pace : Pace; a watcher that falls back to polling sets `pace.polls`.
    n_unannounced : files that a later scan found although no event had told of them.
    """

    def __init__(self, plan: Plan, sources: Iterable[Source] = (), *, settle_all: bool = False) -> None:
        readers = Readers(plan)
        self.area = Area(plan, readers.suffixes)
        self.pace = Pace()
        self._files = Files(plan, readers, self.area, iter(sources), settle_all=settle_all)
        self._settle_all = settle_all
        self._hints: list[str] = []
        self._next_scan = -math.inf
        self._rotation: Iterator[str] = iter(())
        self._rotated_at = math.inf
        self._n_scans = 0
        self.n_unannounced = 0

    @property
    def roots(self) -> tuple[str, ...]:
        """The landing's folders as absolute paths."""
        return self.area.roots

    @property
    def progress(self) -> Progress:
        """Running totals; `n_found` counts new files, and is known before the first batch of a scan."""
        return self._files.progress

    def scan(self, now: float) -> Iterator[Batch]:
        """List every folder, and give what is new or grown; `now` is POSIX seconds. This is the truth."""
        began_s = time.thread_time()
        self._n_scans += 1
        new = self._new(None, now)
        known = list(self._files.memory.paths()) if self._settle_all or self._n_scans == 1 else []
        self._next_scan = now + self.pace.interval_s(time.thread_time() - began_s, changed=bool(new))
        waiting = [path for path, one in self._files.pending.items() if one.n_errors == 0 or one.due <= now]
        yield from self._look_at(new, now)
        yield from self._look_at(waiting, now)
        yield from self._look_at(known, now)
        yield from self._due(now)

    def visit(self, now: float) -> Iterator[Batch]:
        """Give what is due at `now`: hinted, young and growing files, the rotation, a scan when due."""
        hints, self._hints = self._hints, []
        for path in hints:
            self._files.hint(path, now)
        yield from self._look_at(hints, now)
        if now >= self._next_scan or self.area.all_dirty or self._next_scan - now > self.pace.LONGEST_S:
            yield from self.scan(now)
            return
        yield from self._look_at(self._new(self.area.take_dirty(), now), now)
        yield from self._due(now)

    def wait_s(self, now: float) -> float:
        """Return for how long nothing is due, unless an event comes."""
        if self._hints or self.area.all_dirty:
            return 0.0
        due = min((one.due for one in self._files.pending.values()), default=math.inf)
        return max(0.0, min(self._next_scan, due, self._files.growing.next_due()) - now)

    def hint(self, path: str) -> None:
        """Say that a file was renamed into place or closed: it is taken at once if it validates."""
        stored = self.area.stored(path)
        if stored is not None:
            self._hints.append(stored)

    def distrust(self, folder: str | None = None) -> None:
        """Say that a folder (None: everything) may have changed unseen; it is listed at the next visit."""
        self.area.distrust(folder)

    def waiting(self, now: float) -> list[Waiting]:
        """Return the files and folders that are not taken, or not wholly, and why."""
        return [
            Waiting(path=path or ".", age_s=max(0.0, now - one.first_seen), why=one.why)
            for path, one in [*self._files.pending.items(), *self.area.troubles.items()]
            if one.why
        ]

    def _new(self, folders: Iterable[str] | None, now: float) -> list[str]:
        """Return files that were never met, the oldest first, since that is the order of their arrival."""
        found = []
        for path in self.area.list_new(folders, self._files.memory, now):
            if path not in self._files.pending:
                with contextlib.suppress(OSError):
                    found.append((os.lstat(self.area.real(path)).st_mtime_ns, path))
        self.progress.n_found += len(found)
        if folders is None and self._n_scans > 1:
            self.n_unannounced += sum(mtime_ns / 1e9 < now - _QUEUED_S for mtime_ns, _ in found)
        return [path for _, path in sorted(found)]

    def _due(self, now: float) -> Iterator[Batch]:
        """Give what pending files, growing files and the rotation have."""
        pending = self._files.pending
        yield from self._look_at([path for path, one in pending.items() if one.due <= now], now)
        yield from self._look_at(self._files.growing.due(now), now)
        yield from self._look_at(self._turns(now), now)

    def _look_at(self, paths: Iterable[str], now: float) -> Iterator[Batch]:
        for path in paths:
            yield from self._files.look(path, now)

    def _turns(self, now: float) -> Iterator[str]:
        """Yield the share of all known files whose turn in the rotation it is."""
        self._rotated_at = min(self._rotated_at, now)
        share = min(1.0, (now - self._rotated_at) / ROTATION_S)
        n_turns = int(len(self._files.memory) * share)
        if n_turns:
            self._rotated_at = now
        for _ in range(n_turns):
            path = next(self._rotation, None)
            if path is None:
                self._rotation = self._files.memory.paths()
                path = next(self._rotation)
            yield path
