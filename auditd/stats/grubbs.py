"""One outlier in a normal sample."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, choice, probability, vector

SOURCE = "Grubbs (1969), Technometrics 11:1-21"
N_MIN = 3


@dataclass(frozen=True, kw_only=True)
class Grubbs(HypothesisTest):
    """Result of `grubbs`; the statistic G is the largest deviation from the mean in standard deviations.

    Attributes
    ----------
    index : position of the most deviating value, from 0.
    critical : G above which the value is an outlier at `level`.
    level : as asked for.
    outlier : whether G exceeds `critical`.
    """

    index: int
    critical: float
    level: float
    outlier: bool


def grubbs(x: ArrayLike, level: float = 0.05, *, alternative: str = "two-sided") -> Grubbs:
    """Test whether the most deviating value is an outlier.

    Null hypothesis: all values come from one normal distribution. Alternative: one does not, on either side
    ("two-sided") or on the one named ("max", "min").

    Parameters
    ----------
    x : values, shape (n,), at least 3.
    level : probability of declaring an outlier when there is none; decides `critical` and `outlier`.
    alternative : "two-sided", "max" or "min".

    Raises
    ------
    BadInput : values not finite or not one-dimensional; a level outside (0, 1); another alternative.
    NotTestable : fewer than 3 values, or constant ones.

    Notes
    -----
    Assumes independent normal values. Heavy tails raise the false alarms without limit as n grows. Two
    outliers hide each other: use `generalized_esd`. The p-value is Bonferroni's bound, exact where two
    values cannot both exceed G and otherwise too large by less than its square.

    References
    ----------
    Grubbs (1969), Procedures for detecting outlying observations in samples, Technometrics 11:1-21. Pearson &
    Chandra Sekar (1936), Biometrika 28:308-320 (range of exactness).
    """
    level = probability(level, "level")
    choice(alternative, "alternative", ("two-sided", "max", "min"))
    values = vector(x, "x", n_min=N_MIN, varying=True)
    n = values.size
    deviations = _standardised(values, alternative)
    index = int(np.argmax(deviations))
    sides = 2 if alternative == "two-sided" else 1
    statistic = float(deviations[index])
    critical = critical_deviation(n, level / sides)
    return Grubbs(
        statistic=statistic, n=n, source=SOURCE, pvalue=deviation_pvalue(statistic, n, sides),
        null="all values come from one normal distribution", index=index, critical=critical, level=level,
        outlier=statistic > critical,
    )  # fmt: skip


def critical_deviation(n: int, level: float) -> float:
    """The largest of n standardised deviations that has probability `level`, one-sided, by Bonferroni."""
    from scipy.special import stdtrit

    t = -float(stdtrit(n - 2, level / n))
    return (n - 1) * t / math.sqrt(n * (n - 2 + t * t))


def deviation_pvalue(deviation: float, n: int, sides: int) -> float:
    """Bonferroni's bound on the probability that one of n standardised deviations exceeds this one."""
    from scipy.special import stdtr

    rest = (n - 1) ** 2 - n * deviation * deviation
    if rest <= 0.0:
        return 0.0
    t = deviation * math.sqrt(n * (n - 2) / rest)
    return min(1.0, sides * n * float(stdtr(n - 2, -t)))


def _standardised(values: Floats, alternative: str) -> Floats:
    centred = values - values[0]
    centred = centred / float(np.abs(centred).max())
    centred -= centred.mean()
    z: Floats = centred / math.sqrt(float(centred @ centred) / (values.size - 1))
    if alternative == "two-sided":
        return np.abs(z)
    return z if alternative == "max" else -z
