"""A response over the campaign in a few numbers, for `status` and `show`: decimated, extremes kept."""

from __future__ import annotations

from typing import Any

import numpy as np

from auditd.plan import Plan
from auditd.series.table import RunTable

N_BINS = 60
"""Bins of a strip: it fits into 80 columns beside a name."""


def strip(table: RunTable, plan: Plan, response: str) -> dict[str, Any]:
    """Return bins of the response less its cells' means: mean, lowest and highest value, in order.

    Keys: `first`, `last` (positions), `mean`, `low`, `high` (lists of `N_BINS` numbers at most), `sd`.
    """
    series = table.series(plan, response)
    n = len(series.values)
    if n == 0:
        return {"first": None, "last": None, "n": 0, "mean": [], "low": [], "high": [], "sd": None}
    counts = np.bincount(series.cells.codes)
    sums = np.bincount(series.cells.codes, series.values)
    residuals = series.values - (sums / np.maximum(counts, 1))[series.cells.codes]
    starts = np.unique(np.linspace(0, n, min(N_BINS, n) + 1).astype(int)[:-1])
    sizes = np.diff([*starts, n])
    return {
        "first": int(series.positions[0]),
        "last": int(series.positions[-1]),
        "n": n,
        "mean": (np.add.reduceat(residuals, starts) / sizes).tolist(),
        "low": np.minimum.reduceat(residuals, starts).tolist(),
        "high": np.maximum.reduceat(residuals, starts).tolist(),
        "sd": float(np.sqrt(residuals @ residuals / max(n - len(np.unique(series.cells.codes)), 1))),
    }
