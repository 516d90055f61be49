"""Analysis of variance between groups whose variances differ."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from numpy.typing import ArrayLike

from auditd.stats._groups import check_each_varies, check_within, group_values
from auditd.stats._results import HypothesisTest

SOURCE = "Welch (1951), Biometrika 38:330-336"


@dataclass(frozen=True, kw_only=True)
class WelchAnova(HypothesisTest):
    """Result of `welch_anova`; the statistic is Welch's F, with degrees of freedom `df`."""

    df: tuple[float, float]


def welch_anova(x: ArrayLike, groups: Iterable[Any]) -> WelchAnova:
    """Test whether groups share one mean, when their variances may differ.

    Null hypothesis: all groups have the same mean. Alternative: some means differ (one-sided in F).

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
    Assumes independent values, normal within groups. With skewed values and small unequal groups the false
    alarms rise, and with many groups of fewer than about ten values as well. Dependence inside groups raises
    them.

    References
    ----------
    Welch (1951), On the comparison of several mean values: an alternative approach, Biometrika 38:330-336.
    """
    from scipy.special import fdtrc

    grouped = group_values(x, groups, each_min=2)
    check_within(grouped)
    check_each_varies(grouped)
    k = grouped.k
    weights = grouped.sizes / grouped.variances
    shares = weights / weights.sum()
    deviations = grouped.means - float(shares @ grouped.means)
    between = float(weights @ (deviations * deviations)) / (k - 1)
    rest = 1.0 - shares
    lack = float((rest * rest / (grouped.sizes - 1.0)).sum()) / (k * k - 1.0)
    statistic = between / (1.0 + 2.0 * (k - 2) * lack)
    df = (float(k - 1), 1.0 / (3.0 * lack))
    return WelchAnova(
        statistic=statistic, n=grouped.n, source=SOURCE, pvalue=float(fdtrc(*df, statistic)),
        null="all groups have the same mean", df=df,
    )  # fmt: skip
