"""Events of the filesystem as wake-ups, or the reason why the landing is polled."""

from __future__ import annotations

import threading
from typing import Literal

from auditd.landing.landing import Landing


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
    n_overflows : how often the queue of events has overflowed.
    """

    def __init__(self, landing: Landing, watch: Literal["auto", "events", "poll"] = "auto") -> None:
        self.wake = threading.Event()
        self.mode: Literal["events", "poll"] = "poll"
        self.reason = ""
        self.n_overflows = 0

    def start(self) -> None:
        """Begin to watch; falls back to polling where events do not work, and never raises for it."""
        raise NotImplementedError

    def stop(self) -> None:
        """End every thread that `start` began."""
        raise NotImplementedError

    def relay(self) -> None:
        """Tell the landing what the events since the last call said, and clear `wake`; any loop calls it."""
        raise NotImplementedError

    def tend(self, now: float) -> bool:
        """Restart dead threads, notice new roots; False when watching cannot be restored (exit 70)."""
        raise NotImplementedError
