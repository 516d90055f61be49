"""Bounds of the Durbin-Watson statistic's critical value over all designs."""

from __future__ import annotations

from scipy.optimize import brentq

from auditd.errors import NotTestable
from auditd.stats._quadratic_form import upper_tail
from auditd.stats._validate import Floats, count, probability
from auditd.stats.durbin_watson import path_eigenvalues

# Half a unit in the tenth decimal; printed tables have two to five.
BOUND_TOLERANCE = 5e-11
N_MAX = 100_000


def durbin_watson_bounds(n: int, k: int, level: float) -> tuple[float, float]:
    """Critical values d_L and d_U between which the exact one-sided critical value of any design lies.

    Parameters
    ----------
    n : number of residuals, at most 100,000.
    k : regressors besides the constant, 0 or more; n ≥ k + 3.
    level : one-sided level of the test against positive correlation.

    Returns
    -------
    tuple of float
        (d_L, d_U) to about ten decimals. With k = 0 both are the exact critical value.

    Raises
    ------
    BadInput : n or k is no whole number in range, or the level is outside of (0, 1).
    NotTestable : n < k + 3.

    Assumptions
    -----------
    A constant among the regressors, and errors as for `durbin_watson`.

    References
    ----------
    Durbin and Watson (1950), Biometrika 37:409-428, section 2 (the bounding eigenvalues). Savin, N. E. and
    White, K. J. (1977), Econometrica 45:1989-1996 (tables). Some printed reprints of the tables have errors.
    """
    n = count(n, "n", low=1, high=N_MAX)
    k = count(k, "k", low=0)
    level = probability(level, "level")
    if n < k + 3:
        raise NotTestable(f"n of at least k + 3 = {k + 3}", n)
    roots = path_eigenvalues(n)
    return _quantile(roots[1 : n - k], level), _quantile(roots[k + 1 :], level)


def _quantile(roots: Floats, level: float) -> float:
    """The d with P(Σ (λ_i − d) z_i² ≤ 0) = level."""
    return float(
        brentq(lambda d: upper_tail(d - roots) - level, roots[0], roots[-1], xtol=BOUND_TOLERANCE, rtol=1e-12)
    )
