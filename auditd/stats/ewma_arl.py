"""Average run length of an EWMA chart with fixed limits."""

from __future__ import annotations

import math

import numpy as np

from auditd.errors import BadInput
from auditd.stats._validate import number
from auditd.stats.cusum_arl import LONGEST, gauss_legendre, normal_density, solve_run_lengths

# Gauss-Legendre nodes: so many for each width of the kernel that fits between the limits, beside a base.
NODES_PER_WIDTH = 10
NODES_BASE = 40
# Dense systems beyond this take more than seconds and 130 MB.
N_NODES_MAX = 4000


def ewma_arl(lam: float, limit: float, shift: float) -> float:
    """Mean number of values until a two-sided EWMA, started at its target, leaves fixed limits.

    Parameters
    ----------
    lam : weight of the newest value, in (0, 1].
    limit : half-width of the limits in final standard deviations of the average, above 0.
    shift : of the values' mean, in units of sigma; 0 in control.

    Returns
    -------
    float
        At least 1; relative error below about 1e-9, and about 1e-16 times the run length beyond 1e7.

    Raises
    ------
    BadInput : parameters out of range, lam so small (about 3e-4 at limit 3) that the integral equation needs
        more than 4,000 nodes, or a run length beyond 1e12.

    Assumptions
    -----------
    Independent normal values with known mean and standard deviation.

    References
    ----------
    Crowder, S. V. (1987), Technometrics 29:401-407 (integral equation). Lucas, J. M. and Saccucci, M. S.
    (1990), Technometrics 32:1-12.
    """
    lam = number(lam, "lam", above=0.0, below=1.0, closed=True)
    limit = number(limit, "limit", above=0.0, below=1e3)
    shift = number(shift, "shift", above=-1e3, below=1e3)
    if lam < 1e-9:
        raise BadInput(f"lam is {lam:g}; a weight above 0 is expected")
    half = limit * math.sqrt(lam / (2.0 - lam))
    n_nodes = NODES_BASE + math.ceil(NODES_PER_WIDTH * 2.0 * half / lam)
    if n_nodes > N_NODES_MAX:
        raise BadInput(f"lam = {lam:g} with limit = {limit:g} needs {n_nodes} nodes; at most {N_NODES_MAX}")
    nodes, weights = gauss_legendre(n_nodes)
    y, w = half * nodes, half * weights
    # The first row is the chart's start; no run comes back to exactly there, so its column is zero.
    starts = np.concatenate(([0.0], y))
    kernel = np.zeros((n_nodes + 1, n_nodes + 1))
    kernel[:, 1:] = w / lam * normal_density((y[None, :] - (1.0 - lam) * starts[:, None]) / lam - shift)
    length = float(solve_run_lengths(kernel)[0])
    if math.isinf(length):
        raise BadInput(f"the run length for limit = {limit:g} is beyond {LONGEST:g}; choose a smaller limit")
    return max(1.0, length)
