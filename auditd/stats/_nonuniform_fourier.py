"""Fourier sums over uneven times at equally spaced frequencies, by gridding and one transform.

Each value is spread over a few cells of a fine grid by a smooth bump, the grid is transformed, and the bump's
own transform is divided out. The error is below 1e-10 of the sum of absolute values.

References
----------
Dutt, A. and Rokhlin, V. (1993), SIAM J. Sci. Comput. 14:1368-1393. Barnett, A. H., Magland, J. and af
Klinteberg, L. (2019), SIAM J. Sci. Comput. 41:C479-C504 (the bump exp(β√(1 − z²))).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from auditd.stats._validate import Floats

# Cells that one value is spread over, and the bump's sharpness for a grid twice as fine as needed
# (Barnett et al. 2019, equation 1.8: β = 2.30 w gives about 10^(1 − w)).
N_CELLS = 13
SHARPNESS = 2.30 * N_CELLS
# Nodes of the quadrature for the bump's transform; 64 leave an error below 1e-14.
N_QUADRATURE = 64
# Degree of the fit to that transform; its error is below 1e-15 of the transform at frequency zero.
N_CHEBYSHEV = 40
# Values spread at once (about 500 bytes each).
BLOCK_SIZE = 1_000_000


def fourier_sums(phases: Floats, x: Floats, n_frequencies: int) -> NDArray[np.complex128]:
    """Σ_t x_t exp(2πi j φ_t) for j = 0 … n_frequencies, with φ in turns."""
    from scipy.fft import next_fast_len, rfft

    length = next_fast_len(max(2 * (2 * n_frequencies + 1), 4 * N_CELLS), real=True)
    grid = np.zeros(length)
    for start in range(0, x.size, BLOCK_SIZE):
        part = phases[start : start + BLOCK_SIZE]
        position = (part - np.floor(part)) * length
        place = np.ceil(position - 0.5 * N_CELLS).astype(np.int64)[:, None] + np.arange(N_CELLS)
        z = (place - position[:, None]) / (0.5 * N_CELLS)
        spread = np.exp(SHARPNESS * (np.sqrt(np.maximum(1.0 - z * z, 0.0)) - 1.0))
        spread *= x[start : start + BLOCK_SIZE, None]
        grid += np.bincount((place % length).ravel(), weights=spread.ravel(), minlength=length)
    sums = np.conj(rfft(grid)[: n_frequencies + 1])
    return np.asarray(sums / _bump_transform(np.arange(n_frequencies + 1) / length))


def _bump_transform(cycles_per_cell: Floats) -> Floats:
    """∫ bump(s) cos(2π f s) ds over its N_CELLS cells, for f up to one quarter, by a Chebyshev fit."""
    nodes, weights = np.polynomial.legendre.leggauss(N_QUADRATURE)
    bump = 0.5 * N_CELLS * weights * np.exp(SHARPNESS * (np.sqrt(1.0 - nodes**2) - 1.0))
    fit = np.polynomial.Chebyshev.interpolate(
        lambda f: np.cos(np.pi * N_CELLS * np.outer(f, nodes)) @ bump, N_CHEBYSHEV, domain=[0.0, 0.26]
    )
    return np.asarray(fit(cycles_per_cell))
