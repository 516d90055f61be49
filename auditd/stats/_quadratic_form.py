"""Tail of a quadratic form in independent standard normals, with relative accuracy however deep.

Imhof's inversion integral along the vertical line through its saddle point: there the integrand is largest
where it crosses the real axis and of the size of the tail itself, so that nothing cancels. On the imaginary
axis, as Imhof has it, double precision leaves an absolute error of about 1e-13 instead.

References
----------
Imhof, J. P. (1961), Biometrika 48:419-426. Rice, S. O. (1980), SIAM J. Sci. Stat. Comput. 1:438-448
(the shifted contour). Farebrother, R. W. (1980, 1984), Applied Statistics 29:224-227, 33:363-366
(Pan's procedure, another way to relative accuracy in the tail).
"""

from __future__ import annotations

import math

import numpy as np

from auditd.stats._validate import Floats

# The trapezoidal sum is accepted when halving its step changes it by less than this share.
RELATIVE_TOLERANCE = 1e-12
MAX_HALVINGS = 12
# Contributions below this share of the largest one are left out of the sum.
NEGLIGIBLE_LOG = -42.0
# Complex numbers held at once (16 bytes each).
BLOCK_SIZE = 2_000_000


def upper_tail(weights: Floats) -> float:
    """P(Σ w_i z_i² > 0) for independent standard normal z_i."""
    largest, smallest = float(weights.max()), float(weights.min())
    if largest <= 0.0:
        return 0.0
    if smallest >= 0.0:
        return 1.0
    scaled = weights / max(largest, -smallest)
    upper = _small_tail(scaled)
    return upper if upper <= 0.5 else 1.0 - _small_tail(-scaled)


def _small_tail(weights: Floats) -> float:
    """The tail, by trapezoidal sums along the contour whose step is halved until they agree."""
    end = 0.5 / float(weights.max())
    saddle = _saddle_point(weights, end)
    height = _log_integrand(weights, np.array([saddle + 0j]))[0].real
    scale = min(saddle, end - saddle)
    curvature = float(np.sum(2.0 * (weights / (1.0 - 2.0 * weights * saddle)) ** 2)) + saddle**-2
    step = min(0.5, 1.0 / (scale * math.sqrt(curvature)))
    total = _trapezoid(weights, saddle, scale, step, height, offset=0.0)
    for _ in range(MAX_HALVINGS):
        between = _trapezoid(weights, saddle, scale, step, height, offset=0.5)
        refined = 0.5 * (total + between)
        step *= 0.5
        if abs(refined - total) <= RELATIVE_TOLERANCE * abs(refined):
            total = refined
            break
        total = refined
    return min(1.0, max(0.0, math.exp(height) * total / math.pi))


def _saddle_point(weights: Floats, end: float) -> float:
    """Where K(s) − log s is least on (0, end): its derivative rises from −∞ to ∞ there."""
    low, high = 0.0, end
    for _ in range(60):
        middle = 0.5 * (low + high)
        slope = float(np.sum(weights / (1.0 - 2.0 * weights * middle))) - 1.0 / middle
        low, high = (middle, high) if slope < 0.0 else (low, middle)
        if high - low <= 1e-9 * min(high, end - low):
            break
    return 0.5 * (low + high)


def _log_integrand(weights: Floats, s: np.ndarray) -> np.ndarray:
    """K(s) − log s, with K the cumulant generating function of the form, for complex s."""
    out = np.empty(s.size, dtype=np.complex128)
    rows = max(1, BLOCK_SIZE // weights.size)
    for start in range(0, s.size, rows):
        part = s[start : start + rows]
        logs = np.log(1.0 - 2.0 * weights[None, :] * part[:, None])
        out[start : start + rows] = -0.5 * logs.sum(axis=1) - np.log(part)
    return out


def _trapezoid(
    weights: Floats, saddle: float, scale: float, step: float, height: float, offset: float
) -> float:
    """Sum over one half of the contour s = saddle + i·scale·sinh(u), relative to the integrand's height."""
    total, first, n_block = 0.0, 0, 32
    while True:
        u = (np.arange(first, first + n_block) + offset) * step
        logs = _log_integrand(weights, saddle + 1j * scale * np.sinh(u)) - height
        terms = np.exp(logs).real * np.cosh(u)
        if first == 0 and offset == 0.0:
            terms[0] *= 0.5
        total += float(terms.sum())
        if logs[-1].real + u[-1] < NEGLIGIBLE_LOG or u[-1] > 100.0:
            return total * step * scale
        first += n_block
