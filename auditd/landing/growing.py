"""Files of lines that may grow on: looked at often after a change, ever more seldom without one."""

from __future__ import annotations

import math

N_ALWAYS = 1000
_RECENT_S = 600.0
"""Beyond this number, files that have not changed for this long are left to the rotation."""
_SOONEST_S = 0.5
_LATEST_S = 30.0
_AGE_SHARE = 0.1
_LOOK_S = 5e-6
_SHARE_OF_CORE = 0.01
"""A look costs about 5 µs (measured); all looks together take at most this share of one core."""


class Growing:
    """When each such file is looked at next. A file that is held open tells nothing by events."""

    def __init__(self) -> None:
        self._changed_at: dict[str, float] = {}
        self._due: dict[str, float] = {}

    def note(self, path: str, changed_at: float) -> None:
        """Note that a file has given something."""
        self._changed_at[path] = changed_at
        self._due[path] = changed_at + self._pause_s(0.0)

    def drop(self, path: str) -> None:
        """Forget a file that is gone."""
        self._changed_at.pop(path, None)
        self._due.pop(path, None)

    def due(self, now: float) -> list[str]:
        """Return the files to look at now, and note that they were looked at."""
        paths = [path for path, due in self._due.items() if due <= now or due > now + _LATEST_S * 2]
        for path in paths:
            age_s = max(0.0, now - self._changed_at[path])
            if age_s > _RECENT_S and len(self._due) > N_ALWAYS:
                self.drop(path)
            else:
                self._due[path] = now + self._pause_s(age_s)
        return paths

    def next_due(self) -> float:
        """Return when the next look is due."""
        return min(self._due.values(), default=math.inf)

    def _pause_s(self, age_s: float) -> float:
        polite_s = len(self._due) * _LOOK_S / _SHARE_OF_CORE
        return max(polite_s, min(_LATEST_S, max(_SOONEST_S, age_s * _AGE_SHARE)))
