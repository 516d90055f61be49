"""The interval that takes every run as independent, shown beside the honest one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Floats, Ints


@dataclass(frozen=True, kw_only=True)
class Naive:
    """Welch's comparison of two sides, each the equally weighted mean of its cells.

    variance : of the difference if runs were independent; sd : pooled within the compared cells, with sd_df
        degrees of freedom.
    """

    estimate: float
    low: float
    high: float
    variance: float
    sd: float
    sd_df: int


def welch(y: Floats, code: Ints, weights: Floats, confidence: float) -> Naive | None:
    """Compare sides by the cells' weights (negative for a, positive for b); None where no run repeats its
    cell.

    References
    ----------
    Welch (1947), Biometrika 34:28-35; Satterthwaite (1946), Biometrics Bulletin 2:110-114.
    """
    from scipy.special import stdtrit

    n_cells = len(weights)
    count = np.bincount(code, minlength=n_cells)
    mean = np.bincount(code, y, n_cells) / np.maximum(count, 1)
    squares = np.bincount(code, (y - mean[code]) ** 2, n_cells)
    variance, spent = 0.0, 0.0
    compared = weights != 0
    sd_df = int((count[compared] - 1).sum())
    if sd_df < 1:
        return None
    pooled = float(squares[compared].sum()) / sd_df
    for side in (weights < 0, weights > 0):
        df = int((count[side] - 1).sum())
        spread = float(squares[side].sum()) / df if df > 0 else pooled
        part = spread * float((weights[side] ** 2 / count[side]).sum())
        variance += part
        spent += part * part / (df if df > 0 else sd_df)
    df_welch = variance * variance / spent if spent > 0 else float(sd_df)
    estimate = float(weights @ mean)
    half = float(stdtrit(df_welch, 0.5 + confidence / 2)) * variance**0.5
    return Naive(
        estimate=estimate,
        low=estimate - half,
        high=estimate + half,
        variance=variance,
        sd=pooled**0.5,
        sd_df=sd_df,
    )
