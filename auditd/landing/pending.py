"""Files that are not taken yet, or not wholly: since when, why, and when to look again."""

from __future__ import annotations

import os

import msgspec

STILL_S = 60.0
"""A last line without newline is taken after so long without a change (design.md, section 5)."""
_LOOK_AGAIN_S = 30.0
_FIRST_BACK_OFF_S = 1.0
_LAST_BACK_OFF_S = 300.0


class Pending(msgspec.Struct, kw_only=True):
    """One such file. `still_since` is when its present size and mtime were first seen."""

    first_seen: float
    still_since: float
    size: int = -1
    mtime_ns: int = -1
    due: float = 0.0
    why: str = ""
    hinted: bool = False
    tried: tuple[int, int, int, bool] | None = None
    n_errors: int = 0

    def look(self, status: os.stat_result, now: float) -> float:
        """Note a file's status, and return for how long it has been still."""
        if (self.size, self.mtime_ns) != (status.st_size, status.st_mtime_ns):
            self.size, self.mtime_ns = status.st_size, status.st_mtime_ns
            self.still_since = now
        self.still_since = min(self.still_since, now)  # the clock was set back
        return max(now - self.still_since, now - status.st_mtime_ns / 1e9)

    def wait_for(self, why: str, now: float, at_least_s: float) -> None:
        """Look again later, the later the longer it has waited."""
        age_s = max(0.0, now - self.still_since)
        self.why, self.hinted = why, False
        self.due = now + max(at_least_s, min(_LOOK_AGAIN_S, age_s / 4))

    def fail(self, error: OSError, now: float) -> None:
        """Back off after an error of the filesystem."""
        self.n_errors += 1
        self.why = f"{error.strerror or error} ({self.n_errors} attempts)"
        self.due = now + min(_LAST_BACK_OFF_S, _FIRST_BACK_OFF_S * 2 ** min(self.n_errors - 1, 12))
