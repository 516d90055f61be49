"""Ljung-Box test of the first autocorrelations together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._autocovariance import centred, lagged_products
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import count, vector


@dataclass(frozen=True, kw_only=True)
class LjungBox(HypothesisTest):
    """Result of `ljung_box`: also degrees of freedom, and the older Box-Pierce form with its p-value."""

    df: int
    lags: int
    box_pierce: float
    box_pierce_pvalue: float


def ljung_box(x: ArrayLike, lags: int, n_fitted: int = 0) -> LjungBox:
    """Detect any autocorrelation up to a lag by the Ljung-Box portmanteau statistic.

    Null hypothesis: the autocorrelations of lags 1 … lags are all zero. Alternative: at least one is not.

    Parameters
    ----------
    x : (n,) values or residuals in the order of the runs; their mean is taken off.
    lags : number of lags, from 1 to n − 1.
    n_fitted : number of ARMA coefficients fitted to get the residuals; reduces the degrees of freedom.

    Returns
    -------
    LjungBox
        `.statistic` Q ≥ 0, chi-squared with `.df` = lags − n_fitted.

    Raises
    ------
    BadInput : malformed values or counts.
    NotTestable : fewer than lags + 1 values, or constant ones.

    Assumptions
    -----------
    Finite variance and many more values than lags: with lags above about n / 4 the level drifts upwards.
    Spread that changes with time (ARCH) raises the false-alarm rate. Residuals of a regression with lagged
    responses make it miss dependence; take `breusch_godfrey` there.

    References
    ----------
    Ljung, G. M. and Box, G. E. P. (1978), Biometrika 65:297-303. Box, G. E. P. and Pierce, D. A. (1970), J.
    Am. Stat. Assoc. 65:1509-1526.
    """
    from scipy.special import chdtrc

    lags = count(lags, "lags")
    df = lags - count(n_fitted, "n_fitted", low=0, high=lags - 1)
    values = vector(x, "x", n_min=2, varying=True)
    n = values.size
    if n < lags + 1:
        raise NotTestable(f"at least lags + 1 = {lags + 1} values", n)
    products = lagged_products(centred(values), lags)
    squares = (products[1:] / products[0]) ** 2
    pierce = float(n * squares.sum())
    ljung = float(n * (n + 2.0) * np.sum(squares / (n - np.arange(1.0, lags + 1.0))))
    return LjungBox(
        statistic=ljung,
        n=n,
        source="Ljung & Box (1978), Biometrika 65:297",
        pvalue=float(chdtrc(df, ljung)),
        null=f"the autocorrelations of lags 1 to {lags} are all zero",
        df=df,
        lags=lags,
        box_pierce=pierce,
        box_pierce_pvalue=float(chdtrc(df, pierce)),
    )
