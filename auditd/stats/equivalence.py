"""Whether two means differ by less than a margin."""

from __future__ import annotations

import math
from dataclasses import dataclass

from numpy.typing import ArrayLike

from auditd.errors import BadInput
from auditd.stats._groups import Grouped, check_each_varies
from auditd.stats._results import HypothesisTest
from auditd.stats._two_samples import two_samples
from auditd.stats._validate import number

SOURCE = "Schuirmann (1987), Journal of Pharmacokinetics and Biopharmaceutics 15:657-680"


@dataclass(frozen=True, kw_only=True)
class Equivalence(HypothesisTest):
    """Result of `equivalence`; the statistic is the t of the one-sided test with the larger p-value.

    Attributes
    ----------
    estimate : mean of a − mean of b.
    standard_error, df : of the estimate.
    low, high : interval of confidence 1 − 2·level; inside ± margin exactly when p is at most `level`.
    pvalue_lower, pvalue_upper : of the tests against a difference of −margin or less, and of margin or more.
    margin, level : as asked for.
    equivalent : whether p is at most `level`.
    """

    estimate: float
    standard_error: float
    df: float
    low: float
    high: float
    pvalue_lower: float
    pvalue_upper: float
    margin: float
    level: float
    equivalent: bool


def equivalence(
    a: ArrayLike, b: ArrayLike, margin: float, pooled: bool = False, level: float = 0.05
) -> Equivalence:
    """Test by two one-sided tests whether two means differ by less than a margin.

    Null hypothesis: the means differ by the margin or more. Alternative: they differ by less.

    Parameters
    ----------
    a, b : values, shapes (n₁,) and (n₂,), at least 2 each.
    margin : the smallest difference that matters, in the unit of the values; above 0.
    pooled : take one variance for both samples; otherwise Welch's standard error and degrees of freedom.
    level : of each one-sided test, and so of both.

    Raises
    ------
    BadInput : values not finite or not one-dimensional; a margin that is not above 0; a level outside (0,
        0.5).
    NotTestable : a sample of one, or samples without variation.

    Notes
    -----
    Assumes independent values, and means that are nearly normal. Positive dependence makes the standard error
    too small, and equivalence is then claimed too often. `pooled` with unequal variances and sizes claims it
    too often when the smaller sample varies more.

    References
    ----------
    Schuirmann (1987), A comparison of the two one-sided tests procedure and the power approach, Journal of
    Pharmacokinetics and Biopharmaceutics 15:657-680. Welch (1947), Biometrika 34:28-35.
    """
    from scipy.special import stdtr, stdtrit

    margin, level = number(margin, "margin", above=0.0), number(level, "level", above=0.0, below=0.5)
    if not isinstance(pooled, bool):
        raise BadInput(f"pooled is {pooled!r}; True or False is expected")
    samples = two_samples(a, b, each_min=2)
    estimate = float(samples.means[0] - samples.means[1])
    error, df = _pooled_error(samples) if pooled else _welch_error(samples)
    t_lower, t_upper = (estimate + margin) / error, (estimate - margin) / error
    p_lower, p_upper = float(stdtr(df, -t_lower)), float(stdtr(df, t_upper))
    width = -float(stdtrit(df, level)) * error
    pvalue = max(p_lower, p_upper)
    return Equivalence(
        statistic=t_lower if p_lower > p_upper else t_upper, n=samples.n, source=SOURCE, pvalue=pvalue,
        null="the means differ by the margin or more", estimate=estimate, standard_error=error, df=df,
        low=estimate - width, high=estimate + width, pvalue_lower=p_lower, pvalue_upper=p_upper,
        margin=margin, level=level, equivalent=pvalue <= level,
    )  # fmt: skip


def _pooled_error(samples: Grouped) -> tuple[float, float]:
    df = samples.n - 2
    return math.sqrt(samples.square_within / df * float((1.0 / samples.sizes).sum())), float(df)


def _welch_error(samples: Grouped) -> tuple[float, float]:
    check_each_varies(samples)
    parts = samples.variances / samples.sizes
    total = float(parts.sum())
    shares = parts / total
    return math.sqrt(total), 1.0 / float((shares * shares / (samples.sizes - 1.0)).sum())
