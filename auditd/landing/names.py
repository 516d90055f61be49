"""Which names in a landing are result files, by their names alone."""

from __future__ import annotations

import fnmatch
import os
import re
from collections.abc import Iterable

TEMPORARY = (".*", "*~", "*.tmp", "*.part", "*.swp", ".nfs*")
"""Names that writers use before a file is complete (design.md, section 5): files and folders alike."""
_temporary = re.compile("|".join(map(fnmatch.translate, TEMPORARY)), re.DOTALL).match


def is_temporary(name: str) -> bool:
    """Whether a name is one that is passed over."""
    return _temporary(name) is not None


class Names:
    """Says of a name whether it is a result file's.

    Parameters
    ----------
    patterns : `landing.match`; a pattern with a `/` is matched against the path within the landing.
    suffixes : suffixes that have a reader; they decide where there are no patterns.
    """

    def __init__(self, patterns: Iterable[str], suffixes: frozenset[str]) -> None:
        patterns = list(patterns)
        self._suffixes = suffixes
        self._by_name = _any_of([one for one in patterns if "/" not in one])
        self._by_path = _any_of([one.removeprefix("./") for one in patterns if "/" in one])
        self._patterned = bool(patterns)

    def takes(self, name: str, inner: str) -> bool:
        """Whether a file is read, by its name and its path within the landing."""
        if is_temporary(name):
            return False
        if not self._patterned:
            return os.path.splitext(name)[1].lower() in self._suffixes
        return bool(
            (self._by_name and self._by_name.match(name)) or (self._by_path and self._by_path.match(inner))
        )


def _any_of(patterns: list[str]) -> re.Pattern[str] | None:
    return re.compile("|".join(map(fnmatch.translate, patterns)), re.DOTALL) if patterns else None
