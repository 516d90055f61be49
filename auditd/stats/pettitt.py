"""Pettitt's test of a single change of level."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._results import HypothesisTest
from auditd.stats._validate import vector


@dataclass(frozen=True, kw_only=True)
class Pettitt(HypothesisTest):
    """Result of `pettitt`: also the index, from 0, of the last run before the change."""

    index: int


def pettitt(x: ArrayLike) -> Pettitt:
    """Detect one change of level at an unknown run by the largest rank-sum difference.

    Null hypothesis: all values come from one distribution. Alternative, two-sided: from some run on they are
    shifted.

    Parameters
    ----------
    x : (n,) values in the order of the runs; ties get mean ranks.

    Returns
    -------
    Pettitt
        `.statistic` K = max |U_t|, approximate `.pvalue` 2 exp(−6 K² / (n³ + n²)) cut at 1, `.index` of the
        last run before the change, from 0.

    Raises
    ------
    BadInput : malformed values.
    NotTestable : fewer than 4 values, or constant ones.

    Assumptions
    -----------
    Independent values: autocorrelation raises the false-alarm rate strongly. The p-value is an upper bound
    that is conservative below n = 50 and with many ties. A trend is found too and dated at its middle.

    References
    ----------
    Pettitt, A. N. (1979), Applied Statistics 28:126-135, equations 2.3 and 2.9.
    """
    from scipy.stats import rankdata

    values = vector(x, "x", n_min=4, varying=True)
    n = values.size
    u = 2.0 * np.cumsum(rankdata(values))[:-1] - np.arange(1.0, n) * (n + 1.0)
    index = int(np.argmax(np.abs(u)))
    k = float(abs(u[index]))
    return Pettitt(
        statistic=k,
        n=n,
        source="Pettitt (1979), Applied Statistics 28:126",
        pvalue=min(1.0, 2.0 * math.exp(-6.0 * (k / n) ** 2 / (n + 1.0))),
        null="all values come from one distribution",
        index=index,
    )
