"""Seeded campaigns with known truth for the calibration of auditd.evidence."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.signal import lfilter


@dataclass(frozen=True, kw_only=True)
class Campaign:
    """Runs whose two cells do not differ, and the half-width of the interval that knows the truth (normal
    quantile)."""

    values: np.ndarray
    cells: np.ndarray
    known_half: float
    host: np.ndarray | None = None
    block: np.ndarray | None = None
    own: float = 0.0  # true difference of the cells over these hosts, weighted as an additive fit does


def autoregressive(rng, n, phi):
    """A stationary AR(1) of unit variance."""
    e = rng.standard_normal(n)
    e[0] /= np.sqrt(1 - phi * phi)
    return lfilter([1.0], [1.0, -phi], e) * np.sqrt(1 - phi * phi)


def known_half_ar(cells, phi):
    """1.96 × standard error of generalised least squares with the true coefficient and variance."""
    rows = np.column_stack((cells == 0, cells == 1)).astype(float)
    white = rows.copy()
    white[1:] -= phi * rows[:-1]
    white[0] *= np.sqrt(1 - phi * phi)
    covariance = np.linalg.inv(white.T @ white) * (1 - phi * phi)
    return 1.959964 * float(np.sqrt(np.array([-1, 1]) @ covariance @ np.array([-1, 1])))


def serial(rng, n, phi, order):
    """Two cells of n/2 runs in `order` ("A then B" or "randomised") with AR(1) errors."""
    cells = np.repeat([0, 1], n // 2)
    if order == "randomised":
        rng.shuffle(cells)
    return Campaign(values=autoregressive(rng, n, phi), cells=cells, known_half=known_half_ar(cells, phi))


def hosts(rng, n, n_hosts, icc, interaction, crossing):
    """Two cells over hosts, crossed evenly or unevenly, in a randomised order; unit variance apart from the
    interaction."""
    if crossing == "even":
        host, cells = np.arange(n) % n_hosts, (np.arange(n) // n_hosts) % 2
    else:
        share = np.linspace(1, 4, n_hosts)
        host = rng.choice(n_hosts, n, p=share / share.sum())
        cells = (rng.random(n) < rng.uniform(0.25, 0.75, n_hosts)[host]).astype(int)
    order = rng.permutation(n)
    host, cells = host[order], cells[order]
    values = np.sqrt(1 - icc) * rng.standard_normal(n) + np.sqrt(icc) * rng.standard_normal(n_hosts)[host]
    own = np.sqrt(interaction) * rng.standard_normal((n_hosts, 2))
    values += own[host, cells]
    return Campaign(
        values=values,
        cells=cells,
        host=host,
        own=weighted_difference(own[:, 1] - own[:, 0], host, cells),
        known_half=known_half_hosts(host, cells, 1 - icc, icc, interaction),
    )


def weighted_difference(own, host, cells):
    """Mean of the hosts' own differences with weights n_a·n_b / (n_a + n_b)."""
    a, b = (np.bincount(host[cells == side], minlength=len(own)) for side in (0, 1))
    return float(np.average(own, weights=a * b / np.maximum(a + b, 1)))


def builds(rng, n, n_builds, icc, interaction, crossing):
    """As `hosts`, less the true difference over these builds: a claim about them alone, whose known interval
    is that of a block."""
    c = hosts(rng, n, n_builds, icc, interaction, crossing)
    known = known_half_hosts(c.host, c.cells, 1 - icc, icc, 0.0)
    return replace(c, values=c.values - c.own * c.cells, known_half=known)


def known_half_hosts(host, cells, error, icc, interaction):
    """1.96 × standard error of generalised least squares on the cell × host means with the true variances."""
    slot, count = np.unique(host * 2 + cells, return_counts=True)
    where, side = slot // 2, slot % 2
    covariance = np.diag(error / count + interaction) + icc * (where[:, None] == where[None, :])
    rows = np.column_stack((side == 0, side == 1)).astype(float)
    inverse = np.linalg.inv(rows.T @ np.linalg.solve(covariance, rows))
    return 1.959964 * float(np.sqrt(np.array([-1, 1]) @ inverse @ np.array([-1, 1])))


def paired(rng, n, rho, phi, order):
    """n/2 seed blocks of two runs, correlation ρ within a block, AR(1) in the rest; known_half is the
    paired t interval's."""
    from scipy.stats import t

    half = n // 2
    cells, block = np.repeat([0, 1], half), np.tile(np.arange(half), 2)
    if order == "randomised":
        mixed = rng.permutation(n)
        cells, block = cells[mixed], block[mixed]
    values = np.sqrt(rho) * rng.standard_normal(half)[block] + np.sqrt(1 - rho) * autoregressive(rng, n, phi)
    sides = np.zeros((2, half))
    sides[cells, block] = values
    difference = sides[1] - sides[0]
    known = float(t.ppf(0.975, half - 1) * difference.std(ddof=1) / np.sqrt(half))
    return Campaign(values=values, cells=cells, block=block, known_half=known)
