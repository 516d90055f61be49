"""Variance between and within groups by restricted maximum likelihood, from sufficient statistics."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._groups import SizeClasses, check_within, group_values, size_classes
from auditd.stats._results import Estimate

SOURCE = "Patterson & Thompson (1971), Biometrika 58:545-554; Searle, Casella & McCulloch (1992), 3.8 and 6.6"
# Points at which the profile is looked at before the best is refined; it rarely has two maxima.
N_GRID = 129


@dataclass(frozen=True, kw_only=True)
class VarianceComponents(Estimate):
    """Result of `variance_components`; the statistic is the intraclass correlation.

    Attributes
    ----------
    between, within : variance between groups (0 at the boundary) and within groups.
    mean : the mean over groups, weighted as the components imply.
    n_groups : the number of groups.
    """

    between: float
    within: float
    mean: float
    n_groups: int


def variance_components(x: ArrayLike, groups: Iterable[Any]) -> VarianceComponents:
    """Estimate the variance of group effects and of values within groups (REML).

    Parameters
    ----------
    x : values, shape (n,).
    groups : label of each value's group, shape (n,); sizes may differ.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; another number of labels.
    NotTestable : one group, only groups of one, constant values, or no variation within groups.

    Notes
    -----
    Assumes group effects drawn independently from one normal law, and normal values of one variance within
    groups. Estimates stay consistent without normality. With fewer than about five groups `between` is hardly
    known. Being kept from falling below zero it is biased upwards when the truth is near zero; `one_way` has
    the unbiased estimate.

    References
    ----------
    Patterson & Thompson (1971), Biometrika 58:545-554. Searle, Casella & McCulloch (1992), Variance
    Components, 3.8 (equal sizes, closed form) and 6.6.
    """
    grouped = group_values(x, groups)
    check_within(grouped)
    classes = size_classes(grouped)
    ratio = _best_ratio(classes)
    within = (classes.within + classes.weighted_square(ratio)) / (grouped.n - 1)
    between = ratio * within
    weights = grouped.sizes / (1.0 + grouped.sizes * ratio)
    mean = grouped.origin + float(weights @ grouped.means) / float(weights.sum())
    return VarianceComponents(
        statistic=between / (between + within), n=grouped.n, source=SOURCE, between=between, within=within,
        mean=mean, n_groups=grouped.k,
    )  # fmt: skip


def _best_ratio(classes: SizeClasses) -> float:
    """The ratio between/within, at least 0, that the restricted likelihood prefers."""
    from scipy.optimize import brentq

    grid = _ratios(classes)
    slopes = [classes.score(r) for r in grid]
    candidates = [0.0]
    for low, high, before, after in zip(grid[:-1], grid[1:], slopes[:-1], slopes[1:], strict=True):
        if before < 0.0 <= after:
            candidates.append(float(brentq(classes.score, low, high, xtol=1e-300, rtol=1e-14)))
    return min(candidates, key=classes.deviance)


def _ratios(classes: SizeClasses) -> list[float]:
    """0 and a geometric grid reaching past every ratio at which the likelihood can have its maximum."""
    largest, smallest = float(classes.size[-1]), float(classes.size[0])
    top = 8.0 / smallest
    while classes.score(top) < 0.0:
        top *= 8.0
    return [0.0, *np.geomspace(1e-8 / largest, top, N_GRID).tolist()]
