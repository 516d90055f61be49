"""Equality of variances by absolute deviations from the groups' means."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._groups import check_within, group_values
from auditd.stats._spread import Spread, spread_test

SOURCE = "Levene (1960), in Olkin (ed.), Contributions to Probability and Statistics, 278-292"


def levene(x: ArrayLike, groups: Iterable[Any]) -> Spread:
    """Test whether groups have one variance, by absolute deviations from each group's mean.

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
    Assumes independent values of symmetric distribution. Skewness raises the false alarms strongly:
    `brown_forsythe` then keeps its level, and on real data the two can differ in their verdict. Groups of two
    or three values make it liberal; dependence inside groups as well.

    References
    ----------
    Levene (1960), Robust tests for equality of variances, in Olkin (ed.), Contributions to Probability and
    Statistics, Stanford, 278-292.
    """
    grouped = group_values(x, groups, each_min=2)
    check_within(grouped)
    return spread_test(grouped, np.abs(grouped.residuals), SOURCE)
