"""Which files have landed and are settled, and from which offset they are to be read."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import msgspec

from auditd.plan import Plan
from auditd.records import Batch, Source


class Progress(msgspec.Struct, kw_only=True):
    """Running totals of one Landing, for a progress bar; `n_found` is known before the first batch."""

    n_found: int = 0
    n_done: int = 0
    n_records: int = 0
    n_bytes: int = 0


class Waiting(msgspec.Struct, frozen=True, kw_only=True):
    """A file that is not taken, or not wholly, since when and why."""

    path: str
    age_s: float
    why: str


class Landing:
    """The files of a plan's landing, what is taken of them, and what is due.

    A batch counts as taken once the next one is asked for (or the iteration has ended): if the store
    fails to commit, break off the iteration, and the next scan gives the batch again.

    Parameters
    ----------
    plan : Plan
    sources : the sources that the store keeps, from earlier sessions.
    settle_all : take what is there and validates without waiting for it to settle (`gather`).

    Attributes
    ----------
    progress : Progress
    roots : tuple of str, the landing's folders as absolute paths.
    """

    def __init__(self, plan: Plan, sources: Iterable[Source] = (), *, settle_all: bool = False) -> None:
        self.progress = Progress()
        self.roots: tuple[str, ...] = ()

    def scan(self, now: float) -> Iterator[Batch]:
        """List every folder, and give what is new or grown; `now` is POSIX seconds. This is the truth."""
        raise NotImplementedError

    def visit(self, now: float) -> Iterator[Batch]:
        """Give what is due at `now`: hinted, young and growing files, the rotation, a scan when due."""
        raise NotImplementedError

    def wait_s(self, now: float) -> float:
        """Return for how long nothing is due, unless an event comes."""
        raise NotImplementedError

    def hint(self, path: str) -> None:
        """Say that a file was renamed into place or closed: it is taken at once if it validates."""
        raise NotImplementedError

    def distrust(self, folder: str | None = None) -> None:
        """Say that a folder (None: everything) may have changed unseen; it is listed at the next visit."""
        raise NotImplementedError

    def waiting(self, now: float) -> list[Waiting]:
        """Return the files that are not taken, or not wholly, and why."""
        raise NotImplementedError
