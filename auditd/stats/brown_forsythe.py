"""Equality of variances by absolute deviations from the groups' medians."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._groups import check_within, group_medians, group_values
from auditd.stats._spread import Spread, spread_test

SOURCE = "Brown & Forsythe (1974), Journal of the American Statistical Association 69:364-367"


def brown_forsythe(x: ArrayLike, groups: Iterable[Any]) -> Spread:
    """Test whether groups have one variance, by absolute deviations from each group's median.

    Null hypothesis: all groups have the same variance. Alternative: some variances differ.

    Parameters
    ----------
    x : values, shape (n,).
    groups : label of each value's group, shape (n,); at least two values each.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; another number of labels.
    NotTestable : one group, a group of one, constant values, or deviations that do not vary.

    Notes
    -----
    Assumes independent values; keeps its level for skewed and heavy-tailed ones. Conservative for small
    groups of odd size. Dependence inside groups raises the false alarms.

    References
    ----------
    Brown & Forsythe (1974), Robust tests for the equality of variances, Journal of the American Statistical
    Association 69:364-367.
    """
    grouped = group_values(x, groups, each_min=2)
    check_within(grouped)
    medians = group_medians(grouped.centred, grouped.group, grouped.sizes)
    return spread_test(grouped, np.abs(grouped.centred - medians[grouped.group]), SOURCE)
