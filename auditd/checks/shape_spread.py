"""Whether the cells have one spread, and whether that matters here."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect
from auditd.series.table import Floats, Ints

N_CELL_SPREAD = 5
"""Runs a cell must have for its standard deviation to be named among the largest and smallest."""
SIZES_ALIKE = 1.5
"""Largest over smallest cell below which pooled intervals keep their level at unequal spreads, nearly
(Scheffé 1959, The Analysis of Variance, 10.4)."""


class ShapeSpread:
    """Detect cells of unequal spread by Brown and Forsythe's test.

    Null hypothesis: all cells have one variance. Alternative: some differ.
    Assumptions: independence; any law.
    """

    name: ClassVar[str] = "brown_forsythe"
    family: ClassVar[Family] = "shape"
    null: ClassVar[str] = "all cells have one variance"
    assumes: ClassVar[str] = "independent runs; any law"
    source: ClassVar[str] = "Brown & Forsythe (1974), JASA 69:364-367"
    n_min: ClassVar[int] = 8
    needs_order: ClassVar[bool] = False
    tiny: ClassVar[float] = 0.0
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer with the largest ratio of standard deviations as effect."""
        from auditd.stats import brown_forsythe

        counts = np.bincount(view.cells)
        use = counts[view.cells] >= 2
        if len(np.unique(view.cells[use])) < 2:
            raise NotTestable("two cells of two runs", "fewer")
        values, cells = view.values[use], np.unique(view.cells[use], return_inverse=True)[1]
        found = brown_forsythe(values, cells)
        sizes = np.bincount(cells)
        return answered(
            self,
            view,
            statistic=found.statistic,
            pvalue=found.pvalue,
            effect=_largest_ratio(values, cells, sizes),
            n=len(values),
            reason=_remark(sizes),
        )


def _largest_ratio(values: Floats, cells: Ints, sizes: Ints) -> Effect | None:
    """Return the largest ratio of standard deviations; its interval allows for the choice among all pairs."""
    from scipy.special import ndtri

    values = values / max(float(np.abs(values).max()), 1e-300)
    squares = np.bincount(cells, values**2)
    large = (sizes >= N_CELL_SPREAD) & (squares > 0)
    if large.sum() < 2:
        return None
    logs = np.where(large, 0.5 * np.log(np.where(large, squares, 1.0) / np.maximum(sizes - 1, 1)), np.nan)
    high, low = int(np.nanargmax(logs)), int(np.nanargmin(logs))
    fourth = np.bincount(cells, values**4) * sizes / np.where(large, squares, 1.0) ** 2
    variance = np.maximum(fourth - 1, 0.1) / (4 * sizes)
    n_pairs = int(large.sum()) * (int(large.sum()) - 1) / 2
    half = float(ndtri(1 - 0.025 / n_pairs) * np.sqrt(variance[high] + variance[low]))
    ratio = float(logs[high] - logs[low])
    return Effect(
        name="largest ratio of standard deviations",
        value=float(np.exp(ratio)),
        low=float(np.exp(max(ratio - half, 0.0))),
        high=float(np.exp(min(ratio + half, 700.0))),
    )


def _remark(sizes: Ints) -> str:
    remedy = "`runaudit compare` and Welch's test allow unequal spreads"
    if sizes.max() <= SIZES_ALIKE * sizes.min():
        return f"matters little for pooled tests of two cells, whose sizes are alike; {remedy}"
    return f"matters for pooled tests, since cells are of unequal sizes; {remedy}"
