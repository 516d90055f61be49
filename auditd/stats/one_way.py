"""One-way analysis of variance, with the intraclass correlation and what it costs the mean."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from numpy.typing import ArrayLike

from auditd.stats._groups import Grouped, SizeClasses, check_within, f_ratio, group_values, size_classes
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import probability

SOURCE = (
    "Fisher (1925), Statistical Methods for Research Workers, ch. VII; interval: Wald (1940), Annals of "
    "Mathematical Statistics 11:96-100; design effect: Kish (1965), Survey Sampling, 5.4"
)


@dataclass(frozen=True, kw_only=True)
class OneWay(HypothesisTest):
    """Result of `one_way`; the statistic is F.

    Attributes
    ----------
    df : degrees of freedom (k − 1, n − k).
    square_between, square_within : sums of squares between and within groups.
    between, within : variance components by equating mean squares to their expectations. Unbiased, so that
        `between` is negative when groups differ by less than chance would have them.
    icc, icc_low, icc_high : intraclass correlation between / (between + within), and its interval.
    design_effect : 1 + (Σnᵢ²/n − 1)·icc: by what factor the variance of the mean over all values exceeds that
        of independent values.
    n_groups : k.
    """

    df: tuple[int, int]
    square_between: float
    square_within: float
    between: float
    within: float
    icc: float
    icc_low: float
    icc_high: float
    design_effect: float
    n_groups: int


def one_way(x: ArrayLike, groups: Iterable[Any], *, confidence: float = 0.95) -> OneWay:
    """Test whether groups share one mean, and measure how alike the values of a group are.

    Null hypothesis: all groups have the same mean. Alternative: some means differ (one-sided in F).

    Parameters
    ----------
    x : values, shape (n,).
    groups : label of each value's group, shape (n,); sizes may differ, and some groups may have one value.
    confidence : of the interval for the intraclass correlation.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; another number of labels.
    NotTestable : one group, only groups of one, constant values, or no variation within groups.

    Notes
    -----
    Assumes independent normal values with one variance. With unequal variances and sizes the false alarms
    rise when the smaller groups vary more, and fall when the larger do: use `welch_anova`. Heavy tails make
    the test conservative. Dependence along the order inside groups raises the false alarms. The interval is
    exact for normal group effects at any sizes; with skew or heavy-tailed group effects it covers too
    seldom.

    References
    ----------
    Fisher (1925), Statistical Methods for Research Workers, ch. VII. Searle, Casella & McCulloch (1992),
    Variance Components, 3.6. Wald (1940), Annals of Mathematical Statistics 11:96-100. Kish (1965), Survey
    Sampling, 5.4.
    """
    from scipy.special import fdtrc

    level = 1.0 - probability(confidence, "confidence")
    grouped = group_values(x, groups)
    check_within(grouped)
    df = (grouped.k - 1, grouped.n - grouped.k)
    within = grouped.square_within / df[1]
    between = (grouped.square_between / df[0] - within) / grouped.mean_size
    icc = between / (between + within)
    low, high = _interval(size_classes(grouped), within, df, level)
    statistic = f_ratio(grouped)
    return OneWay(
        statistic=statistic, n=grouped.n, source=SOURCE, pvalue=float(fdtrc(*df, statistic)),
        null="all groups have the same mean", df=df, square_between=grouped.square_between,
        square_within=grouped.square_within, between=between, within=within, icc=icc, icc_low=low,
        icc_high=high, design_effect=_design_effect(grouped, icc), n_groups=grouped.k,
    )  # fmt: skip


def _design_effect(grouped: Grouped, icc: float) -> float:
    size = float(grouped.sizes @ grouped.sizes) / grouped.n
    return 1.0 + (size - 1.0) * icc


def _interval(classes: SizeClasses, within: float, df: tuple[int, int], level: float) -> tuple[float, float]:
    from scipy.special import fdtri

    low = _ratio_at(classes, df[0] * within * float(fdtri(*df, 1.0 - level / 2)))
    high = _ratio_at(classes, df[0] * within * float(fdtri(*df, level / 2)))
    return low / (1.0 + low), high / (1.0 + high)


def _ratio_at(classes: SizeClasses, target: float) -> float:
    """The ratio between/within at which the weighted square equals `target`; it falls as the ratio grows."""
    from scipy.optimize import brentq

    largest = float(classes.size[-1])
    # A correlation below −1/(n_max − 1) is impossible in the largest group: the ratio stays above −1/n_max.
    low = (-1.0 + 1e-9) / largest
    if classes.weighted_square(low) <= target:
        return -1.0 / largest
    high = 1.0 / largest
    while classes.weighted_square(high) > target:
        high *= 8.0
    return float(brentq(lambda r: classes.weighted_square(r) - target, low, high, xtol=1e-300, rtol=1e-13))
