"""Two samples as a one-way layout of two groups."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._groups import Grouped, check_within, group_values
from auditd.stats._validate import vector


def two_samples(a: ArrayLike, b: ArrayLike, *, each_min: int = 1) -> Grouped:
    """Check two samples and reduce them to sizes, means and sums of squares.

    Raises
    ------
    BadInput : values not finite or not one-dimensional.
    NotTestable : fewer than `each_min` values in a sample, or no variation within the samples.
    """
    first, second = vector(a, "a", n_min=each_min), vector(b, "b", n_min=each_min)
    if first.size + second.size < 3:
        raise NotTestable("at least 3 values in the two samples", f"{first.size} and {second.size}")
    which = np.repeat(np.array([0, 1]), [first.size, second.size])
    grouped = group_values(np.concatenate((first, second)), which)
    check_within(grouped)
    return grouped
