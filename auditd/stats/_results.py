"""What every estimate and every test of this package returns at least.

A function that has more to say subclasses one of these beside its code, also frozen and keyword-only.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class Estimate:
    """A number taken from data.

    Attributes
    ----------
    statistic : the estimate or test statistic.
    n : the number of values that it rests on.
    source : the publication of the method: author, year, place.
    """

    statistic: float
    n: int
    source: str


@dataclass(frozen=True, kw_only=True)
class HypothesisTest(Estimate):
    """A test: an estimate with its null hypothesis.

    Attributes
    ----------
    pvalue : the probability, under the null, of a statistic at least as extreme; in [0, 1].
    null : the null hypothesis in one sentence.
    """

    pvalue: float
    null: str
