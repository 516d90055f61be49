"""What the tests between groups share: sizes, means and spreads of groups from a few passes over the values.

Sums are made by `bincount`, so that time and memory grow with the values and not with values × groups. Values
are centred on their first one before anything is squared: thirteen constant leading digits (NIST's SmLs07 to
SmLs09) then cost no accuracy beyond that of the input itself.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._validate import Floats, Integers, codes, vector

# Residuals whose root mean square is below this many units of rounding of the values are taken as zero.
ROUNDING_UNITS = 8.0


@dataclass(frozen=True, kw_only=True)
class Grouped:
    """Values with their groups, and the sufficient statistics of the normal one-way layout.

    Attributes
    ----------
    centred : values minus their first one, shape (n,).
    residuals : values minus their group's mean, shape (n,).
    group : code of each value's group, 0 … k−1, shape (n,).
    labels : the k groups' labels.
    sizes, means, squares : each group's size, mean of `centred`, sum of squared residuals; shape (k,).
    origin : the first value.
    """

    centred: Floats
    residuals: Floats
    group: Integers
    labels: list[Any]  # labels may be of any type that can be compared for equality
    sizes: Floats
    means: Floats
    squares: Floats
    origin: float

    @property
    def n(self) -> int:
        return int(self.centred.size)

    @property
    def k(self) -> int:
        return int(self.sizes.size)

    @property
    def square_within(self) -> float:
        return float(self.squares.sum())

    @property
    def grand_mean(self) -> float:
        """Mean of `centred` over all values."""
        return float(self.sizes @ self.means) / self.n

    @property
    def square_between(self) -> float:
        deviations = self.means - self.grand_mean
        return float(self.sizes @ (deviations * deviations))

    @property
    def variances(self) -> Floats:
        """Each group's variance, with divisor size − 1; every group needs two values."""
        return self.squares / (self.sizes - 1.0)

    @property
    def mean_size(self) -> float:
        """The size n₀ that takes the place of the common size: (n − Σnᵢ²/n)/(k − 1)."""
        return (self.n - float(self.sizes @ self.sizes) / self.n) / (self.k - 1)


def group_values(x: ArrayLike, groups: Iterable[Any], *, each_min: int = 1) -> Grouped:
    """Check values and groups and reduce them to sizes, means and sums of squares.

    Raises
    ------
    BadInput : values that are not finite numbers in one dimension, or another number of labels.
    NotTestable : one group, constant values, or a group of fewer than `each_min` values.
    """
    values = vector(x, "x", n_min=2, varying=True)
    group, labels = codes(groups, "groups", n=values.size)
    if len(labels) < 2:
        raise NotTestable("at least two groups", f"one, {labels[0]!r}")
    sizes = np.bincount(group, minlength=len(labels)).astype(np.float64)
    smallest = int(np.argmin(sizes))
    if sizes[smallest] < each_min:
        raise NotTestable(
            f"at least {each_min} values in each group", f"{int(sizes[smallest])} in {labels[smallest]!r}"
        )
    return _reduce(values, group, labels, sizes)


def check_within(grouped: Grouped) -> None:
    """Raise where nothing varies within the groups, so that there is no scale to judge differences by."""
    if grouped.n == grouped.k:
        raise NotTestable("a group of at least two values", f"{grouped.k} groups of one")
    if grouped.square_within == 0.0:
        raise NotTestable("values that vary within groups", f"{grouped.k} groups of constant values")


def check_each_varies(grouped: Grouped) -> None:
    """Raise where one group is constant: its variance of zero would have unbounded weight."""
    constant = np.flatnonzero(grouped.squares == 0.0)
    if constant.size:
        label = grouped.labels[int(constant[0])]
        raise NotTestable(
            "values that vary within each group", f"{constant.size} constant groups, such as {label!r}"
        )


def f_ratio(grouped: Grouped) -> float:
    """Mean square between groups over mean square within."""
    between = grouped.square_between / (grouped.k - 1)
    return between / (grouped.square_within / (grouped.n - grouped.k))


def group_medians(values: Floats, group: Integers, sizes: Floats) -> Floats:
    """Each group's median, from one sort by group and value."""
    ordered = values[np.lexsort((values, group))]
    counts = sizes.astype(np.int64)
    starts = np.cumsum(counts) - counts
    low, high = ordered[starts + (counts - 1) // 2], ordered[starts + counts // 2]
    return np.asarray(0.5 * low + 0.5 * high)


def _reduce(values: Floats, group: Integers, labels: list[Any], sizes: Floats) -> Grouped:
    origin = float(values[0])
    centred = values - origin
    means = np.bincount(group, weights=centred, minlength=sizes.size) / sizes
    residuals = centred - means[group]
    # The second pass takes off what rounding left of the first.
    rest = np.bincount(group, weights=residuals, minlength=sizes.size) / sizes
    means += rest
    residuals -= rest[group]
    sums = np.bincount(group, weights=residuals * residuals, minlength=sizes.size)
    unit = ROUNDING_UNITS * np.finfo(np.float64).eps * float(np.abs(centred).max())
    squares: Floats = np.where(np.sqrt(sums / sizes) <= unit, 0.0, sums)
    return Grouped(
        centred=centred, residuals=residuals, group=group, labels=labels, sizes=sizes, means=means,
        squares=squares, origin=origin,
    )  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class SizeClasses:
    """Groups of one size taken together: all that the likelihood of the random one-way layout needs.

    Attributes
    ----------
    size, count : a group size, and how many groups have it.
    mean, square : mean of those groups' means, and the sum of squares of their means about it.
    within : sum of squares within all groups.    n, k : values and groups.
    """

    size: Floats
    count: Floats
    mean: Floats
    square: Floats
    within: float
    n: int
    k: int

    def weighted_square(self, ratio: float) -> float:
        """Σ wᵢ(ȳᵢ − μ)² with wᵢ = nᵢ/(1 + nᵢ·ratio) and μ the mean so weighted."""
        return math.fsum((self._weights(ratio) * self._spreads(ratio)).tolist())

    def score(self, ratio: float) -> float:
        """The derivative of `deviance` by `ratio`."""
        w = self._weights(ratio)
        spreads = self._spreads(ratio)
        total = float(w @ self.count)
        q = self.within + float(w @ spreads)
        square = float((w * w) @ self.count)
        return total - square / total - (self.n - 1) * float((w * w) @ spreads) / q

    def deviance(self, ratio: float) -> float:
        """Minus twice the profiled restricted log-likelihood, but for a constant."""
        w = self._weights(ratio)
        q = self.within + float(w @ self._spreads(ratio))
        logs = float(self.count @ np.log1p(self.size * ratio))
        return logs + math.log(float(w @ self.count)) + (self.n - 1) * math.log(q)

    def _weights(self, ratio: float) -> Floats:
        return self.size / (1.0 + self.size * ratio)

    def _spreads(self, ratio: float) -> Floats:
        """For each class Σ(ȳᵢ − μ)²."""
        w = self._weights(ratio) * self.count
        deviations = self.mean - float(w @ self.mean) / float(w.sum())
        return self.square + self.count * deviations * deviations


def size_classes(grouped: Grouped) -> SizeClasses:
    """Take groups of equal size together."""
    size, which = np.unique(grouped.sizes, return_inverse=True)
    count = np.bincount(which).astype(np.float64)
    mean = np.bincount(which, weights=grouped.means) / count
    deviations = grouped.means - mean[which]
    square: Floats = np.bincount(which, weights=deviations * deviations).astype(np.float64)
    return SizeClasses(
        size=size, count=count, mean=mean, square=square,
        within=grouped.square_within, n=grouped.n, k=grouped.k,
    )  # fmt: skip
