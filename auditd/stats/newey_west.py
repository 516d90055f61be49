"""Covariance of regression coefficients under autocorrelated errors."""

from __future__ import annotations

from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._sandwich import bread, sandwich
from auditd.stats._validate import Floats, count, design_matrix, vector


def newey_west(residuals: ArrayLike, design: ArrayLike, lags: int) -> Floats:
    """Covariance matrix of least-squares coefficients that holds under autocorrelation up to a lag.

    Bartlett weights 1 − l / (lags + 1), no prewhitening and no small-sample factor.

    Parameters
    ----------
    residuals : (n,) residuals in the order of the runs.
    design : (n, p) regressors with their constant column.
    lags : the largest lag, from 0 (White's covariance) to n − 1.

    Returns
    -------
    array (p, p)
        Symmetric and positive semi-definite.

    Raises
    ------
    BadInput : malformed arrays, dependent columns.
    NotTestable : as many columns as rows or more, or lags ≥ n.

    Assumptions
    -----------
    Autocorrelation that dies out well within `lags`, and n large: with strong dependence or short series the
    variances come out too small and intervals too narrow.

    References
    ----------
    Newey, W. K. and West, K. D. (1987), Econometrica 55:703-708.
    """
    lags = count(lags, "lags", low=0)
    e = vector(residuals, "residuals", n_min=2)
    columns = design_matrix(design, e.size)
    if lags >= e.size:
        raise NotTestable(f"more than lags = {lags} residuals", e.size)
    unscaled, scale = bread(columns)
    scores = columns / scale * e[:, None]
    meat = scores.T @ scores
    for lag in range(1, lags + 1):
        product = scores[lag:].T @ scores[:-lag]
        meat += (1.0 - lag / (lags + 1.0)) * (product + product.T)
    return sandwich(unscaled, meat, scale)
