"""Differences between groups by ranks."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, codes, vector

SOURCE = "Kruskal & Wallis (1952), Journal of the American Statistical Association 47:583-621"


@dataclass(frozen=True, kw_only=True)
class KruskalWallis(HypothesisTest):
    """Result of `kruskal_wallis`; the statistic is H corrected for ties.

    Attributes
    ----------
    df : degrees of freedom of the chi-squared approximation, k − 1.
    epsilon_squared : H/(n − 1), the share of the ranks' variation that lies between groups; in [0, 1].
    """

    df: int
    epsilon_squared: float


def kruskal_wallis(x: ArrayLike, groups: Iterable[Any]) -> KruskalWallis:
    """Test by ranks whether groups come from one distribution.

    Null hypothesis: all groups have the same distribution. Alternative: some tend to larger values than
    others.

    Parameters
    ----------
    x : values, shape (n,).
    groups : label of each value's group, shape (n,).

    Raises
    ------
    BadInput : values not finite or not one-dimensional; another number of labels.
    NotTestable : one group, only groups of one, or constant values.

    Notes
    -----
    Assumes independent values. The chi-squared p-value is conservative for groups of fewer than about five.
    Groups of equal median but unequal spread raise the false alarms a little; dependence inside groups raises
    them much.

    References
    ----------
    Kruskal & Wallis (1952), Use of ranks in one-criterion variance analysis, Journal of the American
    Statistical Association 47:583-621, with the correction for ties of its section 1.2.
    """
    from scipy.special import chdtrc
    from scipy.stats import rankdata

    values = vector(x, "x", n_min=3, varying=True)
    group, labels = codes(groups, "groups", n=values.size)
    n, k = values.size, len(labels)
    if k < 2:
        raise NotTestable("at least two groups", f"one, {labels[0]!r}")
    if k == n:
        raise NotTestable("a group of at least two values", f"{k} groups of one")
    ranks: Floats = rankdata(values) - 0.5 * (n + 1)
    sums = np.bincount(group, weights=ranks, minlength=k)
    between = float((sums * sums / np.bincount(group, minlength=k)).sum())
    # The ranks' own variance contains the correction for ties.
    statistic = between * (n - 1) / float(ranks @ ranks)
    return KruskalWallis(
        statistic=statistic, n=n, source=SOURCE, pvalue=float(chdtrc(k - 1, statistic)),
        null="all groups have the same distribution", df=k - 1, epsilon_squared=statistic / (n - 1),
    )  # fmt: skip
