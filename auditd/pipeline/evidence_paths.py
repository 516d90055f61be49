"""The e-processes over the campaign in few numbers: kept as the audit goes, stored with the displays."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from sqlalchemy import Connection

from auditd.pipeline.asking import Document
from auditd.sequential import Advanced, Auditor
from auditd.store.states import stored_display

N_STRETCHES = 256
"""Stretches that a path is kept in, at most; their width doubles when they are full."""
N_DECIMALS = 3
Paths = NDArray[np.float64]
MEAN = "mean of all"


class PathRecorder:
    """The highest log e-value of each stretch of an epoch, a row a family and one for their mean.

    Stretches start at multiples of their width, so that what is kept is a function of the runs and not of the
    blocks in which they came.
    """

    def __init__(self) -> None:
        self.width = 1
        self.n_runs = 0
        self._names: tuple[str, ...] = ()
        self._highest: Paths = np.empty((0, 0))

    def take(self, advanced: Advanced) -> None:
        """Take the paths over the next runs."""
        n = len(advanced.log_mean)
        if n == 0:
            return
        if not self._names:
            self._names = (MEAN, *(f"{kind} along {along}" for kind, along in advanced.log_e))
            self._highest = np.full((len(self._names), N_STRETCHES), -np.inf)
        paths = np.vstack((advanced.log_mean, *advanced.log_e.values()))
        while self.n_runs + n > self.width * N_STRETCHES:
            self._widen()
        stretch = (self.n_runs + np.arange(n)) // self.width
        starts = np.flatnonzero(np.diff(stretch, prepend=-1))
        highest = np.maximum.reduceat(paths, starts, axis=1)
        here = stretch[starts]
        self._highest[:, here] = np.maximum(self._highest[:, here], highest)
        self.n_runs += n

    @property
    def names(self) -> tuple[str, ...]:
        """The mean of all, and the families, a row each."""
        return self._names

    @property
    def highest(self) -> Paths:
        """The highest log e-value of each stretch, shape (rows, stretches)."""
        return self._highest

    def restore(self, width: int, n_runs: int, names: tuple[str, ...], highest: bytes) -> None:
        """Continue from what was kept."""
        self.width, self.n_runs, self._names = width, n_runs, names
        self._highest = np.frombuffer(highest, dtype=np.float64).reshape(len(names), -1).copy()

    def _widen(self) -> None:
        merged = np.maximum(self._highest[:, ::2], self._highest[:, 1::2])
        self._highest = np.full_like(self._highest, -np.inf)
        self._highest[:, : merged.shape[1]] = merged
        self.width *= 2

    def document(self, auditor: Auditor, first: int) -> Document:
        """Return the paths as stored: `first` is the position of the epoch's first run."""
        n = -(-self.n_runs // self.width)
        kept = np.round(np.nan_to_num(self._highest[:, :n], neginf=-1e9), N_DECIMALS).tolist()
        return {
            "first": first,
            "width": self.width,
            "n": self.n_runs,
            "n_scored": auditor.n_scored,
            "n_asked": auditor.n_asked,
            "threshold_first": auditor.threshold_first,
            "threshold_own": auditor.threshold_own,
            "paths": dict(zip(self._names, kept, strict=True)),
        }


def paths_document(
    connection: Connection,
    epoch: int,
    first: int,
    recorders: dict[str, tuple[PathRecorder, Auditor]],
) -> Document:
    """Return the paths of this epoch beside those of earlier ones, as stored."""
    earlier: Any = stored_display(connection, "paths") or {}  # a JSON document
    kept = {number: paths for number, paths in earlier.items() if int(number) < epoch}
    own = {name: recorder.document(auditor, first) for name, (recorder, auditor) in recorders.items()}
    return kept | {str(epoch): own}
