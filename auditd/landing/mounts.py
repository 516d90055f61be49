"""On what kind of filesystem a folder lies, from /proc/self/mountinfo."""

from __future__ import annotations

import os
import re

LOCAL = frozenset(
    {
        "ext2",
        "ext3",
        "ext4",
        "xfs",
        "btrfs",
        "tmpfs",
        "ramfs",
        "zfs",
        "f2fs",
        "bcachefs",
        "jfs",
        "reiserfs",
        "overlay",
    }
)
"""Kinds on which inotify sees every writer, since all writers are on this machine (common practice)."""
_OCTAL = re.compile(r"\\([0-7]{3})")


class Mounts:
    """The mounts of this machine, read once.

    Parameters
    ----------
    table : path of the table, in the format of proc(5), section /proc/pid/mountinfo.
    """

    def __init__(self, table: str = "/proc/self/mountinfo") -> None:
        self._table = table
        self._kinds: dict[str, str] = {}
        self.refresh()

    def refresh(self) -> None:
        """Read the table again; where there is none, nothing is known to be local."""
        try:
            with open(self._table, encoding="utf-8", errors="surrogateescape") as lines:
                self._kinds = dict(_mount(line) for line in lines if " - " in line)
        except OSError:
            self._kinds = {}

    def kind_of(self, path: str) -> str:
        """Return the kind of filesystem of a path, empty where it is not known."""
        path = os.path.realpath(path)
        while path not in self._kinds and path != os.path.dirname(path):
            path = os.path.dirname(path)
        return self._kinds.get(path, "")

    def is_remote(self, path: str) -> bool:
        """Whether others than this machine may write there, so that events cannot be relied on."""
        return self.kind_of(path) not in LOCAL


def _mount(line: str) -> tuple[str, str]:
    """Return a line's mount point and kind of filesystem."""
    left, right = line.split(" - ", 1)
    point = left.split(" ")[4]
    return _OCTAL.sub(lambda octal: chr(int(octal[1], 8)), point), right.split(" ")[0]
