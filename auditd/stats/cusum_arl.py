"""Average run length of a CUSUM chart."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from auditd.errors import BadInput
from auditd.stats._validate import Floats, count, number

# Gauss-Legendre nodes: so many for each sigma of the decision interval, beside a base. Doubling them moves no
# run length tried by more than 1e-10 of itself.
NODES_PER_SIGMA = 10
NODES_BASE = 40
H_MAX = 200.0
# Beyond this run length the linear system keeps fewer than about four digits in double precision.
LONGEST = 1e12


def cusum_arl(k: float, h: float, shift: float, sides: int = 2, head_start: float = 0.0) -> float:
    """Mean number of values until a tabular CUSUM passes its limit.

    Parameters
    ----------
    k : allowance in units of sigma, 0 or more.
    h : decision limit in units of sigma, above 0, at most 200.
    shift : of the values' mean, in units of sigma; 0 in control. One-sided charts watch upward shifts.
    sides : 1 or 2.
    head_start : value that each sum starts from, in [0, h) (fast initial response).

    Returns
    -------
    float
        At least 1; relative error below about 1e-9, and about 1e-16 times the run length beyond 1e7.

    Raises
    ------
    BadInput : parameters out of range, or a run length beyond 1e12, which double precision cannot resolve.

    Assumptions
    -----------
    Independent normal values with known mean and standard deviation. For two sides with a head start the two
    sums must not be able to alarm one after the other without a reset, as holds for head_start ≤ h / 2.

    References
    ----------
    Page (1954), Biometrika 41:100-115 (integral equation). Goel, A. L. and Wu, S. M. (1971), Technometrics
    13:221-230. Lucas, J. M. and Crosier, R. B. (1982), Technometrics 24:199-205 (two sides, head start).
    """
    k = number(k, "k", above=0.0, below=1e3, closed=True)
    h = number(h, "h", above=0.0, below=H_MAX, closed=True)
    shift = number(shift, "shift", above=-1e3, below=1e3)
    sides = count(sides, "sides", low=1, high=2)
    head_start = number(head_start, "head_start", above=0.0, below=h, closed=True)
    if h in (0.0, head_start):
        raise BadInput("h must be above 0, and head_start below h")
    upper_zero, upper = _one_sided_lengths(k, h, shift, head_start)
    if sides == 2:
        upper = _two_sided_length(upper_zero, upper, *_one_sided_lengths(k, h, -shift, head_start))
    if math.isinf(upper):
        raise BadInput(f"the run length for k = {k:g}, h = {h:g} is beyond {LONGEST:g}; choose a smaller h")
    return max(1.0, upper)


def _two_sided_length(upper_zero: float, upper: float, lower_zero: float, lower: float) -> float:
    """Both sums together, from each one's run length started at zero and at the head start."""
    if math.isinf(upper_zero) or math.isinf(lower_zero):
        return min(upper, lower)
    both = upper * lower_zero + lower * upper_zero - upper_zero * lower_zero
    return both / (upper_zero + lower_zero)


def _one_sided_lengths(k: float, h: float, shift: float, head_start: float) -> tuple[float, float]:
    """Run lengths from zero and from the head start; infinite when beyond what can be resolved."""
    from scipy.special import ndtr

    nodes, weights = gauss_legendre(NODES_BASE + math.ceil(NODES_PER_SIGMA * h))
    y, w = 0.5 * h * (nodes + 1.0), 0.5 * h * weights
    starts = np.concatenate(([0.0], y))
    kernel = np.empty((starts.size, starts.size))
    kernel[:, 0] = ndtr(k - shift - starts)
    kernel[:, 1:] = w * normal_density(y[None, :] - starts[:, None] + k - shift)
    lengths = solve_run_lengths(kernel)
    zero = float(lengths[0])
    if math.isinf(zero) or head_start == 0.0:
        return zero, zero
    to_nodes = float(np.sum(w * normal_density(y - head_start + k - shift) * lengths[1:]))
    return zero, 1.0 + zero * float(ndtr(k - shift - head_start)) + to_nodes


@lru_cache(maxsize=16)
def gauss_legendre(n: int) -> tuple[Floats, Floats]:
    """Nodes and weights on (−1, 1), kept because their cost is that of the linear system itself."""
    from scipy.special import roots_legendre

    nodes, weights = roots_legendre(n)
    nodes.flags.writeable = weights.flags.writeable = False
    return nodes, weights


def solve_run_lengths(kernel: Floats) -> Floats:
    """L = 1 + K L; all infinite when double precision cannot resolve the answer."""
    try:
        lengths = np.linalg.solve(np.eye(kernel.shape[0]) - kernel, np.ones(kernel.shape[0]))
    except np.linalg.LinAlgError:
        return np.full(kernel.shape[0], np.inf)
    if not np.all((lengths > 0.0) & (lengths < LONGEST)):
        return np.full(kernel.shape[0], np.inf)
    return np.asarray(lengths)


def normal_density(z: Floats) -> Floats:
    """The standard normal density."""
    return np.asarray(np.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi))
