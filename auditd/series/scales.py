"""The audited scales: linear, log, logit; what a scale cannot hold becomes NaN and stays out of the audit."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def to_scale(values: Floats, scale: Literal["linear", "log", "logit"]) -> Floats:
    """Return values, shape (n,), on an audited scale; infinities and values off the scale become NaN."""
    kept = np.array(values, dtype=np.float64)
    kept[~np.isfinite(kept)] = np.nan
    if scale == "log":
        kept[~(kept > 0)] = np.nan
        return np.log(kept)
    if scale == "logit":
        kept[~((kept > 0) & (kept < 1))] = np.nan
        return np.log(kept) - np.log1p(-kept)
    return kept
