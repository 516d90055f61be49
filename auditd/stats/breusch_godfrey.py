"""Breusch-Godfrey test of serial correlation up to a lag in regression residuals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, count, design_matrix, vector

# Rows whose lagged residuals are held at once.
BLOCK_ROWS = 65_536
# The lagged residuals count as dependent on each other when their scaled Gram matrix is closer to singular.
GRAM_TOLERANCE = 1e-13


@dataclass(frozen=True, kw_only=True)
class BreuschGodfrey(HypothesisTest):
    """Result of `breusch_godfrey`: the LM form, and the F form with its degrees of freedom."""

    df: int
    f: float
    f_df: tuple[int, int]
    f_pvalue: float


def breusch_godfrey(residuals: ArrayLike, design: ArrayLike, lags: int) -> BreuschGodfrey:
    """Detect autocorrelation up to a lag in regression errors by regressing residuals on their own past.

    Null hypothesis: the errors are not autocorrelated at lags 1 … lags. Alternative: they follow an
    autoregression or moving average of an order up to lags.

    Parameters
    ----------
    residuals : (n,) least-squares residuals in the order of the runs; they are freed of the design first,
        which leaves least-squares residuals as they are.
    design : (n, p) regressors with their constant column; lagged responses may be among them.
    lags : order of the alternative. Residuals before the first are taken as zero.

    Returns
    -------
    BreuschGodfrey
        `.statistic` LM = n R², chi-squared with `.df` = lags; `.f`, `.f_pvalue` the F form.

    Raises
    ------
    BadInput : malformed arrays, dependent columns.
    NotTestable : fewer than p + lags + 1 values, or residuals that are all zero or repeat the design.

    Assumptions
    -----------
    The mean is modelled rightly: a step or trend that the design leaves out is found as autocorrelation.
    Spread that changes with time raises the false-alarm rate. LM is somewhat liberal below n = 50; F less so.

    References
    ----------
    Breusch, T. S. (1978), Australian Economic Papers 17:334-355. Godfrey, L. G. (1978), Econometrica
    46:1293-1301.
    """
    from scipy.special import chdtrc, fdtrc

    lags = count(lags, "lags")
    e = vector(residuals, "residuals", n_min=2)
    n = e.size
    columns = design_matrix(design, n)
    p = columns.shape[1]
    free = n - p - lags
    if free < 1:
        raise NotTestable(f"at least p + lags + 1 = {p + lags + 1} residuals", n)
    share = min(1.0, explained_share(e, columns, lags))
    lm = n * share
    f = share / lags * free / (1.0 - share) if share < 1.0 else float(np.finfo(float).max)
    return BreuschGodfrey(
        statistic=lm,
        n=n,
        source="Breusch (1978), Aust. Econ. Papers 17:334; Godfrey (1978), Econometrica 46:1293",
        pvalue=float(chdtrc(lags, lm)),
        null=f"regression errors are not autocorrelated at lags 1 to {lags}",
        df=lags,
        f=f,
        f_df=(lags, free),
        f_pvalue=float(fdtrc(lags, free, f)),
    )


def explained_share(e: Floats, columns: Floats, lags: int) -> float:
    """R² of the residuals regressed on the design and on their own last `lags` values."""
    scale = float(np.abs(e).max())
    if scale == 0.0:
        raise NotTestable("residuals that are not all zero", f"{e.size} zeros")
    basis = np.linalg.qr(columns / np.abs(columns).max(axis=0))[0]
    freed = e / scale
    freed = freed - basis @ (basis.T @ freed)
    freed -= basis @ (basis.T @ freed)
    total = float(freed @ freed)
    if total <= 1e-24 * float(np.sum((e / scale) ** 2)):
        raise NotTestable("residuals that the design does not explain wholly", "none left")
    gram, cross, with_basis = _lag_products(freed, basis, lags)
    gram -= with_basis @ with_basis.T
    diagonal = np.sqrt(np.maximum(np.diagonal(gram), 0.0))
    if np.any(diagonal**2 <= GRAM_TOLERANCE * total):
        raise NotTestable("lagged residuals that differ from the design", "columns that repeat it")
    values, vectors = np.linalg.eigh(gram / np.outer(diagonal, diagonal))
    if values[0] <= GRAM_TOLERANCE * values[-1]:
        raise NotTestable("lagged residuals that differ from each other", "columns that repeat each other")
    turned = vectors.T @ (cross / diagonal)
    return float(np.sum(turned**2 / values)) / total


def _lag_products(e: Floats, basis: Floats, lags: int) -> tuple[Floats, Floats, Floats]:
    """E'E, E'e and E'Q for the lagged residuals E (n, lags), held block by block."""
    gram, cross = np.zeros((lags, lags)), np.zeros(lags)
    with_basis = np.zeros((lags, basis.shape[1]))
    padded = np.concatenate((np.zeros(lags), e))
    windows = np.lib.stride_tricks.sliding_window_view(padded, lags)[: e.size, ::-1]
    for start in range(0, e.size, BLOCK_ROWS):
        rows = slice(start, start + BLOCK_ROWS)
        block = np.ascontiguousarray(windows[rows])
        gram += block.T @ block
        cross += block.T @ e[rows]
        with_basis += block.T @ basis[rows]
    return gram, cross, with_basis
