"""Scores and labels of an epoch's runs so far: for parents' scores and for dating an alarm."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.scored_block import ScoredBlock

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


class Column:
    """An array that grows at its end."""

    def __init__(self, dtype: type[np.generic]) -> None:
        self._held = np.empty(1024, dtype=dtype)
        self._n = 0

    def extend(self, values: npt.NDArray[np.generic]) -> None:
        """Append values."""
        end = self._n + values.size
        if end > self._held.size:
            wider = np.empty(2 * end, dtype=self._held.dtype)
            wider[: self._n] = self._held[: self._n]
            self._held = wider
        self._held[self._n : end] = values
        self._n = end

    def clear(self) -> None:
        """Hold nothing."""
        self._n = 0

    @property
    def values(self) -> npt.NDArray[np.generic]:
        """What is held, as a view."""
        return self._held[: self._n]


class History:
    """Columns of an epoch.

    Attributes
    ----------
    z : scores of all runs, NaN where not scored.
    index : index of each scored run.
    times : times of the scored runs.
    codes : level codes of the scored runs, by nuisance.
    """

    def __init__(self, nuisances: tuple[str, ...]) -> None:
        self._z = Column(np.float64)
        self._index = Column(np.int64)
        self._times = Column(np.float64)
        self._reliability = Column(np.float64)
        self._parent_z = Column(np.float64)
        self._parent_reliability = Column(np.float64)
        self._codes = {name: Column(np.int32) for name in nuisances}

    def add_scores(self, z: FloatArray, reliability: FloatArray) -> None:
        """Append the scores of all runs of a block."""
        self._z.extend(z)
        self._reliability.extend(reliability)

    def add_scored(self, index: IntArray, scored: ScoredBlock) -> None:
        """Append what is known of a block's scored runs."""
        self._index.extend(index)
        self._times.extend(scored.times)
        self._parent_z.extend(scored.parent_z)
        self._parent_reliability.extend(scored.parent_reliability)
        for name, column in self._codes.items():
            column.extend(scored.groups[name].code)

    def forget_scored(self) -> None:
        """Drop what dating looks at; the scores of all runs stay, for parents."""
        for column in (
            self._index,
            self._times,
            self._parent_z,
            self._parent_reliability,
            *self._codes.values(),
        ):
            column.clear()

    @property
    def z(self) -> FloatArray:
        """Scores of all runs."""
        return self._z.values  # type: ignore[return-value]

    @property
    def index(self) -> IntArray:
        """Indices of the scored runs."""
        return self._index.values  # type: ignore[return-value]

    @property
    def reliability(self) -> FloatArray:
        """Reliability of the scores of all runs, 0 where not scored."""
        return self._reliability.values  # type: ignore[return-value]

    @property
    def times(self) -> FloatArray:
        """Times of the scored runs, NaN where unknown."""
        return self._times.values  # type: ignore[return-value]

    @property
    def parent_z(self) -> FloatArray:
        """Parents' scores of the scored runs, NaN where there is none."""
        return self._parent_z.values  # type: ignore[return-value]

    @property
    def parent_reliability(self) -> FloatArray:
        """Reliability of the parents' scores."""
        return self._parent_reliability.values  # type: ignore[return-value]

    def codes(self, nuisance: str) -> IntArray:
        """Level codes of the scored runs."""
        return self._codes[nuisance].values  # type: ignore[return-value]
