"""The newest rows of a column that grows for as long as a campaign, under the numbers they always had."""

from __future__ import annotations

from typing import Generic, TypeVar

import numpy as np
import numpy.typing as npt

Number = TypeVar("Number", bound=np.generic)
Rows = int | np.int64 | npt.NDArray[np.int64]


class LatestRows(Generic[Number]):
    """An array that grows at its end and is forgotten at its beginning.

    Rows are asked for by the number under which they came, counted from 0; those that are forgotten are no
    longer there to be asked for.
    """

    def __init__(self, dtype: type[Number]) -> None:
        self._held: npt.NDArray[Number] = np.empty(1024, dtype=dtype)
        self._start = 0
        self._n = 0

    def __getitem__(self, rows: Rows) -> npt.NDArray[Number]:
        """Return rows by number; raise IndexError where one is forgotten."""
        places = np.asarray(rows - self._start)
        if places.size and places.min() < 0:
            raise IndexError(f"rows before {self._start} are forgotten")
        found: npt.NDArray[Number] = self._held[: self._n][places]
        return found

    @property
    def start(self) -> int:
        """The number of the oldest row that is held."""
        return self._start

    def extend(self, values: npt.NDArray[np.generic]) -> None:
        """Append rows."""
        end = self._n + values.size
        if end > self._held.size:
            wider = np.empty(end + end // 4, dtype=self._held.dtype)
            wider[: self._n] = self._held[: self._n]
            self._held = wider
        self._held[self._n : end] = values
        self._n = end

    def forget_before(self, number: int) -> None:
        """Forget older rows, once they are a quarter of what is held: moving the others costs too."""
        n_old = number - self._start
        if n_old <= self._n // 4:
            return
        kept = self._held[n_old : self._n].copy()
        self._held[: kept.size] = kept
        self._start, self._n = number, kept.size

    def clear(self) -> None:
        """Hold nothing, and count from 0 again."""
        self._start = self._n = 0
