"""The central interval of a mixture of t distributions, one for each grid point."""

from __future__ import annotations

import numpy as np

from auditd.evidence.inputs import Floats

N_BISECTIONS = 60


def half_width(
    centre: float, places: Floats, scales: Floats, weights: Floats, df: float, confidence: float
) -> float:
    """Half-width around `centre` that holds `confidence` of the mixture."""
    from scipy.special import stdtr, stdtrit

    high = float(stdtrit(df, 0.5 + confidence / 2)) * float(scales.max()) + float(
        np.abs(places - centre).max()
    )
    low = 0.0
    shift = centre - places
    for _ in range(N_BISECTIONS):
        middle = 0.5 * (low + high)
        inside = float(
            weights @ (stdtr(df, (shift + middle) / scales) - stdtr(df, (shift - middle) / scales))
        )
        low, high = (middle, high) if inside < confidence else (low, middle)
        if high - low < 1e-9 * high:
            break
    return high
