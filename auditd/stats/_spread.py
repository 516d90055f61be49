"""Levene's test about any centre, for `levene` and `brown_forsythe`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.errors import NotTestable
from auditd.stats._groups import Grouped, f_ratio, group_values
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats


@dataclass(frozen=True, kw_only=True)
class Spread(HypothesisTest):
    """A test of equal spread; the statistic W is an F ratio of absolute deviations.

    Attributes
    ----------
    df : degrees of freedom (k − 1, n − k).
    """

    df: tuple[int, int]


def spread_test(grouped: Grouped, deviations: Floats, source: str) -> Spread:
    """F test of the absolute deviations from each group's centre.

    Raises
    ------
    NotTestable : absolute deviations that do not vary within any group.
    """
    from scipy.special import fdtrc

    df = (grouped.k - 1, grouped.n - grouped.k)
    if float(np.ptp(deviations)) == 0.0:
        raise NotTestable("deviations of unequal size within groups", "deviations of one size")
    reduced = group_values(deviations, grouped.group)
    if reduced.square_within == 0.0:
        raise NotTestable("deviations of unequal size within groups", "one size in each group")
    statistic = f_ratio(reduced)
    return Spread(
        statistic=statistic, n=grouped.n, source=source, pvalue=float(fdtrc(*df, statistic)),
        null="all groups have the same variance", df=df,
    )  # fmt: skip
