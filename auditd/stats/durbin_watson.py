"""Durbin-Watson test of serial correlation in regression residuals, exact for any design."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import BadInput, NotTestable
from auditd.stats._quadratic_form import upper_tail
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, check_varying, choice, design_matrix, vector

# Above this many values the eigenvalues take seconds and the normal approximation is within about 1e-3.
N_EXACT_MAX = 2000
# Residuals count as centred when their mean is below this share of their root mean square.
CENTRED = 1e-8
# Root mean squares over the mean's standard error, beyond which values are no residuals (P < 1e-14).
MEAN_LIMIT = 8.0

Method = Literal["exact", "normal"]


@dataclass(frozen=True, kw_only=True)
class DurbinWatson(HypothesisTest):
    """Result of `durbin_watson`: also the alternative and the method ("exact" or "normal")."""

    alternative: str
    method: Method


def durbin_watson(
    residuals: ArrayLike, design: ArrayLike | None = None, alternative: str = "positive"
) -> DurbinWatson:
    """Detect serial correlation of neighbouring regression errors by the Durbin-Watson ratio.

    Null hypothesis: the errors are independent normal with one variance. Alternative: neighbouring errors are
    correlated, positively (default), negatively, or either ("two-sided": twice the smaller tail).

    Parameters
    ----------
    residuals : (n,) least-squares residuals in the order of the runs. With a design they are freed of it
        first, which leaves least-squares residuals as they are.
    design : (n, p) regressors with their constant column. Without one, residuals whose mean is zero are taken
        as deviations from their mean, others as errors with known mean zero.
    alternative : "positive", "negative" or "two-sided".

    Returns
    -------
    DurbinWatson
        `.statistic` d in [0, 4], `.pvalue`, `.method`: "exact" up to n = 2000 (relative error below about
        1e-10 however small the p-value), "normal" with the exact mean and variance of d above.

    Raises
    ------
    BadInput : malformed arrays, dependent columns, values that are no residuals.
    NotTestable : fewer than p + 2 values, or residuals that are all zero or constant.

    Assumptions
    -----------
    Normal errors (the level hardly moves otherwise at n > 30), one variance (unequal spread in stretches
    moves it either way), regressors fixed: with lagged values of the response among them d is biased
    towards 2 and the test misses dependence; take `breusch_godfrey` there. A level shift or trend that the
    design leaves out counts as positive correlation.

    References
    ----------
    Durbin, J. and Watson, G. S. (1950, 1951), Biometrika 37:409-428, 38:159-177. Imhof (1961), Biometrika
    48:419-426. Farebrother (1980), Applied Statistics 29:224-227.
    """
    choice(alternative, "alternative", ("positive", "negative", "two-sided"))
    e = vector(residuals, "residuals", n_min=3)
    basis, e = _freed_of_design(e, design)
    statistic = float(np.sum(np.diff(e) ** 2) / np.sum(e**2))
    method: Method = "exact" if e.size <= N_EXACT_MAX else "normal"
    lower, upper = _both_tails(statistic, e.size, basis, method)
    pvalue = {"positive": lower, "negative": upper, "two-sided": min(1.0, 2.0 * min(lower, upper))}
    return DurbinWatson(
        statistic=statistic,
        n=e.size,
        source="Durbin & Watson (1950, 1951), Biometrika 37:409, 38:159; exact p: Imhof (1961), Rice (1980)",
        pvalue=pvalue[alternative],
        null="regression errors are independent normal with one variance",
        alternative=alternative,
        method=method,
    )


def _freed_of_design(e: Floats, design: ArrayLike | None) -> tuple[Floats, Floats]:
    """An orthonormal basis (n, p) of the design, and the residuals orthogonal to it, scaled to length one."""
    n = e.size
    scale = float(np.abs(e).max())
    if scale == 0.0:
        raise NotTestable("residuals that are not all zero", f"{n} zeros")
    check_varying(e, "residuals")
    e = e / scale
    if design is not None:
        columns = design_matrix(design, n)
        if n < columns.shape[1] + 2:
            raise NotTestable(f"at least {columns.shape[1] + 2} residuals", n)
        basis = np.linalg.qr(columns / np.abs(columns).max(axis=0))[0]
        freed = e - basis @ (basis.T @ e)
        freed -= basis @ (basis.T @ freed)
        if np.sum(freed**2) <= 1e-24 * np.sum(e**2):
            raise NotTestable("residuals that the design does not explain wholly", "none left")
        return basis, freed
    score = float(np.sum(e)) / math.sqrt(n * float(np.sum(e**2)))
    if abs(score) < CENTRED:
        return np.full((n, 1), 1.0 / math.sqrt(n)), e
    if abs(score) * math.sqrt(n) > MEAN_LIMIT:
        raise BadInput("residuals have a mean far from zero; take off the mean, or pass the design")
    return np.empty((n, 0)), e


def _both_tails(statistic: float, n: int, basis: Floats, method: Method) -> tuple[float, float]:
    """P(d ≤ statistic) and P(d ≥ statistic)."""
    if method == "normal":
        mean, variance = moments(n, basis)
        z = (statistic - mean) / math.sqrt(variance)
        return 0.5 * math.erfc(-z / math.sqrt(2.0)), 0.5 * math.erfc(z / math.sqrt(2.0))
    roots = eigenvalues(n, basis)
    return upper_tail(statistic - roots), upper_tail(roots - statistic)


def path_eigenvalues(n: int) -> Floats:
    """Eigenvalues of the n × n matrix of squared first differences, ascending, the first one zero."""
    return np.asarray(4.0 * np.sin(0.5 * np.pi * np.arange(n) / n) ** 2)


def eigenvalues(n: int, basis: Floats) -> Floats:
    """Eigenvalues of the squared-difference form on the space orthogonal to `basis` (n, p)."""
    p = basis.shape[1]
    if p == 0:
        return path_eigenvalues(n)
    if p == 1 and float(np.ptp(basis)) < 1e-12:
        return path_eigenvalues(n)[1:]
    # The form projected on both sides, with the design's own directions put above all others (which are ≤ 4).
    applied = _squared_difference(basis)
    form = np.diag(np.r_[1.0, np.full(n - 2, 2.0), 1.0]) - np.eye(n, k=1) - np.eye(n, k=-1)
    form -= applied @ basis.T
    form -= basis @ applied.T
    form += basis @ (basis.T @ applied + 8.0 * np.eye(p)) @ basis.T
    return np.asarray(np.linalg.eigvalsh(form)[: n - p])


def moments(n: int, basis: Floats) -> tuple[float, float]:
    """Mean and variance of d under the null, after Durbin and Watson (1950), section 4."""
    p = basis.shape[1]
    applied = _squared_difference(basis)
    inner = basis.T @ applied
    first = 2.0 * (n - 1) - float(np.trace(inner))
    second = (6.0 * n - 8.0) - 2.0 * float(np.sum(applied**2)) + float(np.sum(inner * inner.T))
    free = n - p
    mean = first / free
    return mean, 2.0 * (second - first * mean) / (free * (free + 2.0))


def _squared_difference(columns: Floats) -> Floats:
    """A·columns for the tridiagonal A with e'Ae = Σ(e_t − e_{t−1})²."""
    steps = np.diff(columns, axis=0)
    out = np.zeros_like(columns)
    out[:-1] -= steps
    out[1:] += steps
    return out
