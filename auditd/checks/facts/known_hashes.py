"""What was seen before, by 64-bit hashes: a few tens of bytes an entry, so that millions fit in memory."""

from __future__ import annotations

from array import array

import numpy as np
import numpy.typing as npt

N_RECENT_MIN = 4096
"""Entries kept in a dict before they are sorted in among the others …"""
SHARE_RECENT = 0.05
"""… or this share of those, if more: each entry is then moved some twenty times in all."""


class KnownHashes:
    """Numbers by hash; two things of one hash are taken for one.

    With Python's hashes of 64 bits the probability of any such pair among n entries is below n² / 2^65:
    3e-8 in a campaign of a million runs.
    """

    def __init__(self) -> None:
        self._recent: dict[int, int] = {}
        self._hashes: npt.NDArray[np.int64] = np.empty(0, dtype=np.int64)
        self._numbers: npt.NDArray[np.int32] = np.empty(0, dtype=np.int32)

    def __len__(self) -> int:
        return self._hashes.size + sum(self._sorted(name) is None for name in self._recent)

    def get(self, name: int) -> int | None:
        """Return the number that was put last under a hash, or None."""
        number = self._recent.get(name)
        return self._sorted(name) if number is None else number

    def put(self, name: int, number: int) -> None:
        """Put a number under a hash, in place of an earlier one."""
        self._recent[name] = number
        if len(self._recent) >= max(N_RECENT_MIN, SHARE_RECENT * self._hashes.size):
            self._sort_in()

    def _sorted(self, name: int) -> int | None:
        at = int(self._hashes.searchsorted(name))
        if at < self._hashes.size and self._hashes[at] == name:
            return int(self._numbers[at])
        return None

    def _sort_in(self) -> None:
        n = len(self._recent)
        hashes = np.concatenate([np.fromiter(self._recent, np.int64, n), self._hashes])
        numbers = np.concatenate([np.fromiter(self._recent.values(), np.int32, n), self._numbers])
        # of two equal hashes the first is kept, which is the recent one
        self._hashes, kept = np.unique(hashes, return_index=True)
        self._numbers = numbers[kept]
        self._recent = {}


class Names:
    """Texts in the order in which they came, end to end in one buffer."""

    def __init__(self) -> None:
        self._text = bytearray()
        self._ends = array("L", [0])

    def __len__(self) -> int:
        return len(self._ends) - 1

    def __getitem__(self, number: int) -> str:
        return self._text[self._ends[number] : self._ends[number + 1]].decode("utf-8", "surrogatepass")

    def add(self, name: str) -> int:
        """Append a text and return its number, counted from 0."""
        self._text += name.encode("utf-8", "surrogatepass")
        self._ends.append(len(self._text))
        return len(self._ends) - 2
