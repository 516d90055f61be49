"""Equality of variances of normal groups."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._groups import check_each_varies, check_within, group_values
from auditd.stats._results import HypothesisTest

SOURCE = "Bartlett (1937), Proceedings of the Royal Society A 160:268-282"


@dataclass(frozen=True, kw_only=True)
class Bartlett(HypothesisTest):
    """Result of `bartlett`; the statistic T has nearly a chi-squared law of `df` = k − 1."""

    df: int


def bartlett(x: ArrayLike, groups: Iterable[Any]) -> Bartlett:
    """Test whether normal groups have one variance.

    Null hypothesis: all groups have the same variance. Alternative: some variances differ.

    Parameters
    ----------
    x : values, shape (n,).
    groups : label of each value's group, shape (n,); at least two values each.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; another number of labels.
    NotTestable : one group, a group of one, or a group of constant values.

    Notes
    -----
    Assumes independent normal values, and is as much a test of that: heavy tails raise the false alarms
    without limit as groups grow, light tails lower them. Prefer `brown_forsythe` unless normality is known.

    References
    ----------
    Bartlett (1937), Properties of sufficiency and statistical tests, Proceedings of the Royal Society A
    160:268-282.
    """
    from scipy.special import chdtrc

    grouped = group_values(x, groups, each_min=2)
    check_within(grouped)
    check_each_varies(grouped)
    df = grouped.sizes - 1.0
    total = float(df.sum())
    pooled = grouped.square_within / total
    # Never negative but for rounding: the logarithm of a mean is at least the mean of logarithms.
    unequal = max(0.0, -float(df @ np.log(grouped.variances / pooled)))
    correction = 1.0 + (float((1.0 / df).sum()) - 1.0 / total) / (3.0 * (grouped.k - 1))
    statistic = unequal / correction
    return Bartlett(
        statistic=statistic, n=grouped.n, source=SOURCE, pvalue=float(chdtrc(grouped.k - 1, statistic)),
        null="all groups have the same variance", df=grouped.k - 1,
    )  # fmt: skip
