"""Autocorrelations read off the residuals, for chains that no autoregression of a moderate order whitens.

References
----------
Geyer (1992), Statistical Science 7:473-483, section 3.3 (initial positive and monotone sequences).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.chains import Stretches
from auditd.evidence.inputs import Floats

MAX_CHAINS = 200  # the longest chains; together they hold nearly all pairs
MIN_CHAIN_RUNS = 4


@dataclass(frozen=True, kw_only=True)
class InitialSequence:
    """Autocorrelations to where sums of neighbouring pairs cease to be positive, made to fall."""

    values: Floats

    @property
    def order(self) -> int:
        """Lags that are not 0."""
        return len(self.values)

    def autocorrelations(self, n_lags: int) -> Floats:
        """Autocorrelations at lags 1 … n_lags, 0 beyond the sequence."""
        result = np.zeros(n_lags)
        kept = min(n_lags, len(self.values))
        result[:kept] = self.values[:kept]
        return result


def initial_sequence(residual: Floats, chains: Stretches, n_lags: int) -> InitialSequence:
    """Pool the autocovariances of all chains and cut them by Geyer's rule."""
    gamma = np.zeros(n_lags + 2)
    for runs in chains.longest(MAX_CHAINS, MIN_CHAIN_RUNS):
        x = residual[runs]
        size = 1 << (2 * len(x) - 1).bit_length()
        spectrum = np.abs(np.fft.rfft(x, size)) ** 2
        own = np.fft.irfft(spectrum, size)[: min(len(x), len(gamma))]
        gamma[: len(own)] += own
    rho = gamma / gamma[0]
    pairs = rho[0 : n_lags + 1 : 2][: len(rho[1 : n_lags + 2 : 2])] + rho[1 : n_lags + 2 : 2]
    ended = np.flatnonzero(pairs <= 0)
    n_pairs = int(ended[0]) if len(ended) else len(pairs)
    monotone = np.minimum.accumulate(pairs[:n_pairs])
    kept = rho[: 2 * n_pairs].copy()
    kept *= np.repeat(monotone / pairs[:n_pairs], 2)
    return InitialSequence(values=kept[1:])
