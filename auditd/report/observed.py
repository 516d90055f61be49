"""One response as the pictures see it: deviations from the cells' own levels, in order."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from auditd.series.table import Coded

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True)
class Mark:
    """A warning's place: since when, the runs that cannot be excluded, and when it was raised."""

    label: str
    since: float | None
    since_low: float | None
    since_high: float | None
    raised: float | None


@dataclass(frozen=True, kw_only=True)
class Observed:
    """A response over n runs in order.

    `place` (n,) in the campaign's order, counted from 0; `deviation` (n,) from the cells' means, on the
    audited scale, finite; `aside` (n,) marks runs that an answer set aside, which enter no mean; `worth`
    independent runs a run, at most 1; `n_cells` cells with runs; `axis` names the deviation with unit.
    """

    name: str
    key: str
    axis: str
    place: Floats
    deviation: Floats
    aside: Flags
    nuisance: Mapping[str, Coded]
    worth: float | None
    n_cells: int
    marks: Sequence[Mark] = ()

    @property
    def kept(self) -> Floats:
        """The deviations that are analysed."""
        return self.deviation[~self.aside]

    @property
    def is_constant(self) -> bool:
        """Whether results do not vary within cells."""
        kept = self.kept
        return bool(len(kept) < 2 or np.ptp(kept) <= 1e-12 * max(float(np.abs(kept).max()), 1e-300))


def deviations(values: Floats, cells: Coded, aside: Flags) -> Floats:
    """Return values less the means of their cells, taken over the runs that are not set aside."""
    size = len(cells.levels)
    kept = ~aside
    n = np.bincount(cells.codes[kept], minlength=size)
    total = np.bincount(cells.codes[kept], values[kept], minlength=size)
    n_all = np.bincount(cells.codes, minlength=size)
    total_all = np.bincount(cells.codes, values, minlength=size)
    mean = np.where(n > 0, total / np.maximum(n, 1), total_all / np.maximum(n_all, 1))
    found: Floats = values - mean[cells.codes]
    return found
