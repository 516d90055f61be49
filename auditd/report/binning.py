"""Many runs in few numbers, honestly: equal counts a bin, and the extremes of each are kept."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class Bins:
    """Stretches of a series: first and last x, count, mean, lowest and highest y, shape (bins,) each."""

    first: Floats
    last: Floats
    n: Ints
    mean: Floats
    low: Floats
    high: Floats

    @property
    def middle(self) -> Floats:
        """The middle of each stretch."""
        return (self.first + self.last) / 2


def binned(x: Floats, y: Floats, n_bins: int) -> Bins:
    """Return at most n_bins stretches of equal counts, in the order given; y must not be empty."""
    n = len(y)
    starts = np.unique(np.linspace(0, n, min(n_bins, n) + 1).astype(np.int64)[:-1])
    sizes = np.diff([*starts, n])
    return Bins(
        first=x[starts].astype(np.float64),
        last=x[starts + sizes - 1].astype(np.float64),
        n=sizes,
        mean=np.add.reduceat(y, starts) / sizes,
        low=np.minimum.reduceat(y, starts),
        high=np.maximum.reduceat(y, starts),
    )
