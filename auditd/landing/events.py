"""What watchdog's threads say, gathered for the daemon's own thread."""

from __future__ import annotations

import logging
import os
import threading
from collections import deque

from watchdog.events import (
    DirCreatedEvent,
    DirMovedEvent,
    FileClosedEvent,
    FileCreatedEvent,
    FileMovedEvent,
    FileSystemEvent,
    FileSystemEventHandler,
)

EVENT_FILTER: list[type[FileSystemEvent]] = [
    FileMovedEvent,
    FileClosedEvent,
    FileCreatedEvent,
    DirCreatedEvent,
    DirMovedEvent,
]
"""Without this filter watchdog livelocks beyond some thousand folders (measured; design.md, section 5)."""
_LOGGER = logging.getLogger("watchdog.observers.inotify_c")
_OVERFLOWED = "Inotify queue overflowed"


class Gathered(FileSystemEventHandler):
    """Collects hints and dirty folders in the observer's threads, and wakes who waits for them.

    Attributes
    ----------
    files, folders : paths of files closed or moved into place, and of folders made or moved in.
    n_events : how many events came.
    """

    def __init__(self, wake: threading.Event) -> None:
        self._wake = wake
        self.files: deque[str] = deque()
        self.folders: deque[str] = deque()
        self.n_events = 0

    def dispatch(self, event: FileSystemEvent) -> None:
        """Note one event."""
        path = os.fsdecode(event.dest_path or event.src_path)
        (self.folders if event.is_directory else self.files).append(path)
        self.n_events += 1
        self._wake.set()


class Overflows(logging.Handler):
    """Counts the overflows of the kernel's queue, which watchdog tells by its log only."""

    def __init__(self, wake: threading.Event) -> None:
        super().__init__(logging.WARNING)
        self._wake = wake
        self.n_overflows = 0

    def emit(self, record: logging.LogRecord) -> None:
        """Count a line that tells of an overflow."""
        if str(record.msg).startswith(_OVERFLOWED):
            self.n_overflows += 1
            self._wake.set()

    def attach(self) -> None:
        """Begin to listen."""
        _LOGGER.addHandler(self)

    def detach(self) -> None:
        """Listen no more."""
        _LOGGER.removeHandler(self)
