"""How much longer the memory of a chain makes the variance of the cells' means."""

from __future__ import annotations

import numpy as np

from auditd.evidence.chains import Chains
from auditd.evidence.inputs import Floats, Ints

MAX_EXACT_LAGS = 64  # lags at which pairs within a cell are counted; beyond, their share is taken as constant
NEGLIGIBLE = 1e-3  # autocorrelation that is no longer counted


def same_cell_pairs(cell: Ints, n_cells: int, chains: Chains, n_lags: int) -> Floats:
    """Pairs of runs of one cell at each lag along the chains, by cell: (n_lags, n_cells)."""
    previous = np.full(len(cell), -1, dtype=np.int64)
    previous[chains.child] = chains.parent
    child, above = chains.child, chains.parent
    pairs = np.zeros((n_lags, n_cells))
    for lag in range(n_lags):
        if not len(child):
            break
        same = cell[child] == cell[above]
        pairs[lag] = np.bincount(cell[child[same]], minlength=n_cells)
        higher = previous[above]
        going = higher >= 0
        child, above = child[going], higher[going]
    return pairs


def autocorrelations(phi: Floats, n_lags: int) -> Floats:
    """φ to the power of 1 … n_lags, for each φ: (G, n_lags)."""
    return np.asarray(phi[:, None] ** np.arange(1, n_lags + 1))


def lags_needed(correlation: float, longest: int) -> int:
    """Lags until the autocorrelation is negligible, up to MAX_EXACT_LAGS and the longest chain."""
    size = min(abs(correlation), 0.9999)
    needed = 1 if size < NEGLIGIBLE else int(np.ceil(np.log(NEGLIGIBLE) / np.log(size)))
    return max(1, min(needed, MAX_EXACT_LAGS, longest - 1))


def inflation(phi: Floats, pairs: Floats, count: Floats, chain_runs: float) -> Floats:
    """Variance of each cell's mean ÷ its variance if runs were independent, for each φ: (G, n_cells).

    1 + (2 / n_c)·Σ_k φ^k·(pairs of the cell at lag k); beyond the counted lags the share of pairs is the
    mean of the last ones, less what the chains' ends cut off.
    """
    n_lags = len(pairs)
    exact = autocorrelations(phi, n_lags) @ pairs
    tail_share = pairs[-max(n_lags // 4, 1) :].mean(0)
    left = float(max(round(chain_runs) - n_lags, 0))
    decay = phi**n_lags
    whole = decay * phi / (1 - phi)
    cut = decay * phi * (1 - phi**left) / np.maximum(left * (1 - phi) ** 2, 1e-300) if left > 0 else whole
    tail = np.maximum(whole - cut, 0.0) if left > 0 else np.zeros_like(phi)
    result = 1 + 2 * (exact + tail[:, None] * tail_share) / count
    return np.asarray(np.maximum(result, 1e-3))


def inflation_by(correlation: Floats, pairs: Floats, count: Floats, chain_runs: float) -> Floats:
    """As `inflation`, for autocorrelations at lags 1, 2, … to where they are negligible: (n_cells,)."""
    n_lags = min(len(pairs), len(correlation))
    exact = correlation[:n_lags] @ pairs[:n_lags]
    lags = np.arange(n_lags + 1, len(correlation) + 1)
    fading = np.maximum(1 - (lags - n_lags) / max(chain_runs - n_lags, 1.0), 0.0)
    tail = float(correlation[n_lags:] @ fading)
    result = 1 + 2 * (exact + tail * pairs[-max(n_lags // 4, 1) :].mean(0)) / count
    return np.asarray(np.maximum(result, 1e-3))
