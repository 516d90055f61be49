"""The size of a dependence, estimated from the runs since it began."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput, NotTestable

FloatArray = npt.NDArray[np.float64]

N_RUNS_MIN: Final = 8
"""Runs on each side that an estimate needs."""

LAG_ONE_MAX: Final = 0.9
"""Autocorrelation above which an interval is widened no further."""


@dataclass(frozen=True, kw_only=True)
class Effect:
    """An effect with its interval.

    Attributes
    ----------
    name : what is estimated, with its unit in words.
    value, low, high : estimate and limits of the two-sided interval.
    n : runs that it rests on.
    source : the method.
    """

    name: str
    value: float
    low: float
    high: float
    n: int
    source: str


def shift(before: npt.ArrayLike, after: npt.ArrayLike, *, confidence: float = 0.95) -> Effect:
    """Estimate the shift of values since a change against those before it (`drift`).

    Parameters
    ----------
    before, after : scores, or responses less their cells' means, in order.
    confidence : of the interval.

    Returns
    -------
    Effect in the unit of what is given; Welch's interval, each side's standard error widened by
    √((1 + r)/(1 − r)) where its lag-1 autocorrelation r is positive.

    Raises
    ------
    NotTestable : fewer than N_RUNS_MIN runs on a side.

    Assumptions: AR(1) errors within each side; longer memory leaves the interval too short.

    References
    ----------
    Welch (1947), Biometrika 34. Bartlett (1935), Journal of the Royal Statistical Society 98 (the factor).
    """
    a, b = _finite(before), _finite(after)
    va, vb = _variance_of_mean(a), _variance_of_mean(b)
    df = (va + vb) ** 2 / (va**2 / (a.size - 1) + vb**2 / (b.size - 1)) if va + vb > 0 else float(b.size - 1)
    half = _t_quantile(df, confidence) * float(np.sqrt(va + vb))
    value = float(b.mean() - a.mean())
    return Effect(
        name="shift", value=value, low=value - half, high=value + half, n=b.size, source="Welch 1947"
    )


def _variance_of_mean(values: FloatArray) -> float:
    centred = values - values.mean()
    whole = float(centred @ centred)
    r = float(centred[1:] @ centred[:-1]) / whole if whole > 0 else 0.0
    r = min(max(r, 0.0), LAG_ONE_MAX)
    return whole / (values.size - 1) / values.size * (1.0 + r) / (1.0 - r)


def lag_one(
    scores: npt.ArrayLike, segments: npt.ArrayLike | None = None, *, confidence: float = 0.95
) -> Effect:
    """Estimate the autocorrelation of neighbouring scores (`serial`), within segments when they are given.

    Parameters
    ----------
    scores : scores, or responses less their cells' means, in order.
    segments : level of each, so that neighbours are of one level.
    confidence : of the interval.

    Returns
    -------
    Effect; an interval on Fisher's scale with Bartlett's variance, the bias −(1 + 3r)/n taken off.

    References
    ----------
    Kendall (1954), Biometrika 41 (bias). Fisher (1921), Metron 1 (scale). Bartlett (1946), Supplement to the
    Journal of the Royal Statistical Society 8 (variance of the first autocorrelation of an AR(1)).
    """
    first, second = neighbours(scores, segments)
    if first.size < N_RUNS_MIN:
        raise NotTestable(f"{N_RUNS_MIN} neighbouring runs", first.size)
    r = _correlation(first, second)
    r += (1.0 + 3.0 * r) / first.size
    return _of_chain("lag-1 correlation", r, first.size, "Kendall 1954, Bartlett 1946", confidence)


def neighbours(scores: npt.ArrayLike, segments: npt.ArrayLike | None) -> tuple[FloatArray, FloatArray]:
    """Give the scores of neighbouring runs, of one level where levels are given."""
    z = np.asarray(scores, dtype=np.float64)
    level = np.zeros(z.size) if segments is None else np.asarray(segments)
    if level.shape != z.shape or z.ndim != 1:
        raise BadInput(f"scores and segments must have one shape (n,), got {z.shape} and {level.shape}")
    known = np.isfinite(z)
    z, level = z[known], level[known]
    by_level = np.argsort(level, kind="stable")
    z, level = z[by_level], level[by_level]
    same = level[1:] == level[:-1]
    return z[:-1][same], z[1:][same]


def intraclass(scores: npt.ArrayLike, levels: npt.ArrayLike, *, confidence: float = 0.95) -> Effect:
    """Estimate the intraclass correlation of levels (`batch`).

    Returns
    -------
    Effect; the one-way estimate with Searle's F interval, the harmonic-type n₀ standing for unequal counts.

    References
    ----------
    Searle, Casella & McCulloch (1992), Variance Components, section 3.6. Donner & Wells (1986),
    Biometrics 42.
    """
    z, level = np.asarray(scores, dtype=np.float64), np.asarray(levels)
    if level.shape != z.shape or z.ndim != 1:
        raise BadInput(f"scores and levels must have one shape (n,), got {z.shape} and {level.shape}")
    known = np.isfinite(z)
    z, code = z[known], np.unique(level[known], return_inverse=True)[1]
    count = np.bincount(code)
    n, k = z.size, count.size
    if n < N_RUNS_MIN or k < 2 or n <= k:
        raise NotTestable(
            f"{N_RUNS_MIN} runs over two levels or more, one with two runs",
            f"{n} runs, {k} levels",
        )
    mean = np.bincount(code, weights=z) / count
    between = float((count * (mean - z.mean()) ** 2).sum() / (k - 1))
    within = float(((z - mean[code]) ** 2).sum() / (n - k))
    n0 = (n - (count**2).sum() / n) / (k - 1)
    ratio = between / within if within > 0 else np.inf
    low_q, high_q = _f_quantiles(k - 1, n - k, confidence)
    value, low, high = (_icc(f, float(n0)) for f in (ratio, ratio / high_q, ratio / low_q))
    return Effect(
        name="intraclass correlation", value=value, low=low, high=high, n=n, source="Searle et al. 1992"
    )


def spread_ratio(before: npt.ArrayLike, after: npt.ArrayLike, *, confidence: float = 0.95) -> Effect:
    """Estimate the ratio of standard deviations since a change to before it (`spread`).

    The interval is that of Bonett, whose variance follows the kurtosis, since ranks near the ends of a short
    reference and real responses are not Gaussian.

    References
    ----------
    Bonett (2006), Computational Statistics & Data Analysis 50 (with the pooled kurtosis).
    """
    a, b = _finite(before), _finite(after)
    da, db = a - a.mean(), b - b.mean()
    sa, sb = float((da**2).mean()), float((db**2).mean())
    if sa == 0 or sb == 0:
        raise NotTestable("values that vary on both sides of the change", "a constant")
    kurtosis = (a.size * (da**4).mean() / sa**2 + b.size * (db**4).mean() / sb**2) / (a.size + b.size)
    error = float(np.sqrt(max(kurtosis - 1.0, 0.0) * (1.0 / a.size + 1.0 / b.size) / 4.0))
    ratio = float(np.log(b.std(ddof=1) / a.std(ddof=1)))
    half = _normal_quantile(confidence) * error
    return Effect(
        name="ratio of standard deviations",
        value=float(np.exp(ratio)),
        low=float(np.exp(ratio - half)),
        high=float(np.exp(ratio + half)),
        n=b.size,
        source="Bonett 2006",
    )


def amplitude(
    scores: npt.ArrayLike, times: npt.ArrayLike, period_s: float, *, confidence: float = 0.95
) -> Effect:
    """Estimate the amplitude of a cycle of stated period (`clock`).

    Returns
    -------
    Effect; least squares on sine and cosine, the interval by the delta method, its lower limit at least 0.

    References
    ----------
    Bloomfield (2000), Fourier Analysis of Time Series, section 2.2.
    """
    z, t = np.asarray(scores, dtype=np.float64), np.asarray(times, dtype=np.float64)
    if z.shape != t.shape or z.ndim != 1:
        raise BadInput(f"scores and times must have one shape (n,), got {z.shape} and {t.shape}")
    known = np.isfinite(z) & np.isfinite(t)
    z, phase = z[known], 2.0 * np.pi * np.mod(t[known], period_s) / period_s
    if z.size < N_RUNS_MIN:
        raise NotTestable(f"{N_RUNS_MIN} timed runs", z.size)
    design = np.column_stack((np.ones(z.size), np.sin(phase), np.cos(phase)))
    coefficient, _, rank, _ = np.linalg.lstsq(design, z, rcond=None)
    if rank < 3:
        raise NotTestable("runs at different times of the period", "runs at too few times")
    residual = z - design @ coefficient
    covariance = np.linalg.inv(design.T @ design)[1:, 1:] * float(residual @ residual) / (z.size - 3)
    value = float(np.hypot(coefficient[1], coefficient[2]))
    direction = coefficient[1:] / value if value > 0 else np.array([1.0, 0.0])
    half = _t_quantile(z.size - 3, confidence) * float(np.sqrt(direction @ covariance @ direction))
    return Effect(
        name="amplitude",
        value=value,
        low=max(value - half, 0.0),
        high=value + half,
        n=z.size,
        source="Bloomfield 2000",
    )


def inheritance(scores: npt.ArrayLike, parent_scores: npt.ArrayLike, *, confidence: float = 0.95) -> Effect:
    """Estimate the correlation of runs with their parents (`lineage`); its interval is that of `lag_one`.

    References
    ----------
    Bartlett (1946), Supplement to the Journal of the Royal Statistical Society 8.
    """
    z, p = np.asarray(scores, dtype=np.float64), np.asarray(parent_scores, dtype=np.float64)
    if z.shape != p.shape or z.ndim != 1:
        raise BadInput(f"scores and parent_scores must have one shape (n,), got {z.shape} and {p.shape}")
    known = np.isfinite(z) & np.isfinite(p)
    n = int(known.sum())
    if n < N_RUNS_MIN:
        raise NotTestable(f"{N_RUNS_MIN} restarted runs", n)
    r = _correlation(z[known], p[known])
    return _of_chain("correlation with the parent", r, n, "Bartlett 1946", confidence)


def _finite(values: npt.ArrayLike) -> FloatArray:
    array = np.asarray(values, dtype=np.float64).ravel()
    array = array[np.isfinite(array)]
    if array.size < N_RUNS_MIN:
        raise NotTestable(f"{N_RUNS_MIN} runs", array.size)
    return array


def _correlation(a: FloatArray, b: FloatArray) -> float:
    a, b = a - a.mean(), b - b.mean()
    scale = float(np.sqrt((a @ a) * (b @ b)))
    if scale == 0:
        raise NotTestable("scores that vary", "a constant")
    return float(a @ b) / scale


def _of_chain(name: str, r: float, n: int, source: str, confidence: float) -> Effect:
    """Give a correlation of neighbours in a chain with an interval on Fisher's scale.

    Pairs that share runs vary more than independent ones: (1 − r²)/n instead of (1 − r²)²/n.
    """
    r = min(max(r, -0.999), 0.999)
    half = _normal_quantile(confidence) / np.sqrt((n - 3) * (1.0 - r**2))
    low, high = (float(np.tanh(np.arctanh(r) + sign * half)) for sign in (-1.0, 1.0))
    return Effect(name=name, value=r, low=low, high=high, n=n, source=source)


def _icc(f_ratio: float, n0: float) -> float:
    return 1.0 if np.isinf(f_ratio) else float((f_ratio - 1.0) / (f_ratio + n0 - 1.0))


def _normal_quantile(confidence: float) -> float:
    from scipy.special import ndtri

    return float(ndtri(0.5 + confidence / 2.0))


def _t_quantile(df: float, confidence: float) -> float:
    from scipy.special import stdtrit

    return float(stdtrit(df, 0.5 + confidence / 2.0))


def _f_quantiles(df1: int, df2: int, confidence: float) -> tuple[float, float]:
    from scipy.special import fdtri

    tail = (1.0 - confidence) / 2.0
    return float(fdtri(df1, df2, tail)), float(fdtri(df1, df2, 1.0 - tail))
