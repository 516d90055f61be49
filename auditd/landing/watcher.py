"""Events of the filesystem as wake-ups, or the reason why the landing is polled."""

from __future__ import annotations

import os
import threading
import warnings
from collections import deque
from typing import Literal

from watchdog.observers import Observer
from watchdog.observers.api import BaseObserver

from auditd.landing.events import EVENT_FILTER, Gathered, Overflows
from auditd.landing.landing import Landing

_WATCH_LIMIT = "/proc/sys/fs/inotify/max_user_watches"
_SHARE_OF_WATCHES = 0.8
"""Watches are shared with the user's other programs; beyond this share of the limit events are not used."""
_TEND_S = 10.0
_MAX_RESTARTS = 5
_MAX_UNANNOUNCED = 3
"""So many files that a scan finds while no event at all has come show that events do not come here."""


class Watcher:
    """Wakes the daemon when something lands; never the source of truth.

    Parameters
    ----------
    landing : Landing, told by `hint` and `distrust` what the events say, in `relay`.
    watch : `auto`, `events` or `poll`, as `landing.watch` of the plan.

    Attributes
    ----------
    wake : threading.Event, set when something happened.
    mode, reason : `events` or `poll`, and why, in words for `status`.
    n_restarts : how often dead threads were replaced.
    """

    def __init__(self, landing: Landing, watch: Literal["auto", "events", "poll"] = "auto") -> None:
        self.wake = threading.Event()
        self.mode: Literal["events", "poll"] = "poll"
        self.reason = "not started"
        self.n_restarts = 0
        self._landing, self._watch = landing, watch
        self._gathered = Gathered(self.wake)
        self._overflows = Overflows(self.wake)
        self._n_overflows_told = 0
        self._n_events_tended, self._n_unannounced = 0, 0
        self._observer: BaseObserver | None = None
        self._roots: dict[str, tuple[int, int]] = {}
        self._tended_at = 0.0

    @property
    def n_overflows(self) -> int:
        """How often the queue of events has overflowed."""
        return self._overflows.n_overflows

    def start(self) -> None:
        """Begin to watch; falls back to polling where events do not work, and never raises for it."""
        why_not = self._why_poll()
        if why_not:
            self._poll(why_not)
            return
        # watchdog warns, with a line of its whole state, where a folder is watched twice: harmless
        warnings.filterwarnings("ignore", message="Callback with id", category=RuntimeWarning)
        self._overflows.attach()
        self._observe()

    def stop(self) -> None:
        """End every thread that `start` began."""
        self._overflows.detach()
        observer, self._observer = self._observer, None
        if observer is None:
            return
        observer.unschedule_all()
        if observer.is_alive():
            observer.stop()
            observer.join(timeout=5)

    def relay(self) -> None:
        """Tell the landing what the events since the last call said, and clear `wake`; any loop calls it."""
        self.wake.clear()
        if self.n_overflows > self._n_overflows_told:
            self._n_overflows_told = self.n_overflows
            self._landing.distrust()
        for folder in _drained(self._gathered.folders):
            self._landing.distrust(folder)
        for path in _drained(self._gathered.files):
            self._landing.hint(path)

    def tend(self, now: float) -> bool:
        """Restart dead threads, notice new roots; False when watching cannot be restored (exit 70)."""
        if abs(now - self._tended_at) < _TEND_S or self.mode == "poll":
            return True
        self._tended_at = now
        why_not = self._why_deaf() or self._why_poll()
        if why_not:
            self.stop()
            self._poll(why_not)
        elif not self._alive():
            return self._restart()
        elif self._roots != self._present_roots():
            self._landing.area.mounts.refresh()
            self._landing.distrust()
            return self._restart(counted=False)
        return True

    def _why_poll(self) -> str:
        """Return why events are not used, empty if they are."""
        if self._watch != "auto":
            return "" if self._watch == "events" else "the plan says so"
        for root in self._landing.roots:
            if self._landing.area.mounts.is_remote(root):
                kind = self._landing.area.mounts.kind_of(root) or "an unknown filesystem"
                return f"{root} lies on {kind}, where events of other machines do not come"
        limit, n_folders = watch_limit(), self._landing.area.n_folders
        if limit is not None and n_folders > limit * _SHARE_OF_WATCHES:
            return f"{n_folders} folders; the limit fs.inotify.max_user_watches is {limit}"
        return ""

    def _why_deaf(self) -> str:
        """Return why events seem not to come although they are asked for, empty if they do."""
        n_events, n_unannounced = self._gathered.n_events, self._landing.n_unannounced
        silent = n_events == self._n_events_tended
        if not silent or self._watch == "events":
            self._n_events_tended, self._n_unannounced = n_events, n_unannounced
            return ""
        n_missed = n_unannounced - self._n_unannounced
        return f"{n_missed} files landed and no event came" if n_missed >= _MAX_UNANNOUNCED else ""

    def _poll(self, reason: str) -> None:
        self.mode, self.reason = "poll", reason
        self._landing.pace.polls = True

    def _observe(self) -> None:
        """Watch every root that is there; a limit of the system makes it polling."""
        observer = Observer()
        self._roots = self._present_roots()
        try:
            for root in self._roots:
                recursive = os.path.isdir(root)
                observer.schedule(self._gathered, root, recursive=recursive, event_filter=EVENT_FILTER)
            observer.start()
        except OSError as error:
            observer.unschedule_all()
            self._poll(f"{error.strerror or error}; no more events can be watched")
            return
        self._observer = observer
        self.mode, self.reason = (
            "events",
            "a local filesystem" if self._watch == "auto" else "the plan says so",
        )
        self._landing.pace.polls = False
        self._landing.distrust()

    def _alive(self) -> bool:
        """Whether the observer and every thread beneath it still run."""
        observer = self._observer
        if observer is None or not observer.is_alive():
            return False
        threads = [observer, *observer.emitters]
        threads += [
            one for one in (getattr(emitter, "_inotify_fd", None) for emitter in observer.emitters) if one
        ]
        return all(thread.is_alive() for thread in threads)

    def _restart(self, *, counted: bool = True) -> bool:
        """Replace the observer; polls after too many deaths."""
        self.n_restarts += counted
        try:
            self.stop()
            if self.n_restarts > _MAX_RESTARTS:
                self._poll(f"watching threads have died {self.n_restarts} times")
                return True
            self._overflows.attach()
            self._observe()
        except Exception as error:  # noqa: BLE001 - whatever it is, the daemon must end and be restarted
            self._poll(f"watching cannot be restarted: {error}")
            return False
        return self.mode == "poll" or self._alive()

    def _present_roots(self) -> dict[str, tuple[int, int]]:
        """Return device and inode of every root that is there."""
        present = {}
        for root in self._landing.roots:
            try:
                status = os.stat(root)
            except OSError:
                continue
            present[root] = (status.st_dev, status.st_ino)
        return present


def watch_limit(path: str = _WATCH_LIMIT) -> int | None:
    """Return how many folders a user may watch, None where the system does not say."""
    try:
        with open(path, encoding="ascii") as limit:
            return int(limit.read())
    except (OSError, ValueError):
        return None


def _drained(queue: deque[str]) -> list[str]:
    """Empty a queue that other threads go on filling; each path once, in the order of the last word."""
    taken = []
    while queue:
        taken.append(queue.popleft())
    return list(dict.fromkeys(taken))
