"""Sums of lagged products: dot products for few lags, one transform for many."""

from __future__ import annotations

import numpy as np

from auditd.stats._validate import Floats

# Up to this many lags, dot products are quicker than a transform at every length tried (1e3 to 1e7).
N_DOT_LAGS_MAX = 40


def centred(x: Floats) -> Floats:
    """Deviations from the mean over the largest of them; the second pass removes the mean's rounding."""
    deviations = x - x.mean()
    deviations -= deviations.mean()
    return np.asarray(deviations / np.abs(deviations).max())


def lagged_products(x: Floats, n_lags: int) -> Floats:
    """Σ_t x_t x_{t+k} for k = 0 … n_lags."""
    if n_lags <= N_DOT_LAGS_MAX:
        return np.array([float(x[: x.size - k] @ x[k:]) for k in range(n_lags + 1)])
    from scipy.fft import irfft, next_fast_len, rfft

    length = next_fast_len(x.size + n_lags, real=True)
    spectrum = rfft(x, length)
    return np.asarray(irfft(spectrum.real**2 + spectrum.imag**2, length)[: n_lags + 1])
