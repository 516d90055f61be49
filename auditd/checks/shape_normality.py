"""Whether residuals are normal, and whether that matters at this number of runs."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family, Z
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints

N_CELL_LARGE = 30
"""Runs of the smallest cell from which means are close to normal (common practice) …"""
N_A_SKEW = 25.0
"""… if they are also 25 times the squared skewness (Cochran 1977, Sampling Techniques, 2.15)."""
N_USED = 200_000
"""Residuals used at most, evenly spaced in the order."""


class ShapeNormality:
    """Detect residuals that are not normal by Anderson and Darling's statistic.

    Null hypothesis: residuals from the cells' means, each cell's over its own standard deviation where all
    have 30 runs, are normal. Alternative: they are not. Assumptions: independence; equal spread where cells
    are small.
    """

    name: ClassVar[str] = "anderson_darling"
    family: ClassVar[Family] = "shape"
    null: ClassVar[str] = "residuals from the cells' means are normal"
    assumes: ClassVar[str] = "independent residuals; of equal spread where cells have fewer than 30 runs"
    source: ClassVar[str] = "Anderson & Darling (1952, 1954); Stephens (1974), JASA 69:730-737"
    n_min: ClassVar[int] = 8
    needs_order: ClassVar[bool] = False
    tiny: ClassVar[float] = 0.2
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer, with the remark whether it matters here."""
        from auditd.stats import anderson_darling

        cells = np.unique(view.cells, return_inverse=True)[1]
        counts = np.bincount(cells)
        many = counts >= 2
        if not many.any():
            raise NotTestable("a cell with two runs", "one run a cell")
        values = _standardised(view.values, cells, counts)
        values = values[many[cells]][:: max(1, view.n // N_USED)]
        found = anderson_darling(values)
        kurtosis = _kurtosis(values)
        smallest, skewness = int(counts.min()), _moment(values, 3)
        return answered(
            self,
            view,
            statistic=found.statistic,
            pvalue=found.pvalue,
            effect=kurtosis,
            n=len(values),
            reason=_remark(smallest, skewness),
        )


def _standardised(values: Floats, cells: Ints, counts: Ints) -> Floats:
    """Return residuals over their cells' standard deviations, or rescaled for the means taken off."""
    if counts.min() < N_CELL_LARGE:
        return values * np.sqrt(counts / np.maximum(counts - 1, 1))[cells]
    spread = np.sqrt(np.bincount(cells, values**2) / counts)
    return values / np.where(spread > 0, spread, 1.0)[cells]


def _moment(values: Floats, power: int) -> float:
    centred = values - values.mean()
    spread = float(np.sqrt((centred**2).mean()))
    return float(((centred / spread) ** power).mean()) if spread > 0 else 0.0


def _kurtosis(values: Floats) -> Effect:
    """Return the excess kurtosis with its large-sample interval, by its influence function."""
    centred = values - values.mean()
    spread = float(np.sqrt((centred**2).mean()))
    if not spread > 0:
        raise NotTestable("residuals that vary", "constant ones")
    z = centred / spread
    skewness, kurtosis = float((z**3).mean()), float((z**4).mean())
    influence = z**4 - kurtosis - 2 * kurtosis * (z**2 - 1) - 4 * skewness * z
    half = Z * float(influence.std()) / float(np.sqrt(len(z)))
    excess = kurtosis - 3
    return Effect(name="excess kurtosis", value=excess, low=excess - half, high=excess + half)


def _remark(smallest: int, skewness: float) -> str:
    needed = max(N_CELL_LARGE, round(N_A_SKEW * skewness**2))
    if smallest >= needed:
        return (
            f"matters little for means: {smallest} runs in the smallest cell, {needed} are enough at a "
            f"skewness of {skewness:.2g} (central limit theorem)"
        )
    return (
        f"matters for intervals of means: {smallest} runs in the smallest cell, {needed} would be enough at "
        f"a skewness of {skewness:.2g}"
    )
