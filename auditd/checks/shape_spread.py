"""Whether the cells have one spread."""

from __future__ import annotations

from typing import ClassVar

import msgspec
import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.view import View
from auditd.errors import NotTestable
from auditd.records import Effect


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

    def ask(self, view: View) -> Answer:
        """Return the answer with the largest ratio of standard deviations as effect."""
        from auditd.stats import brown_forsythe

        counts = np.bincount(view.cells)
        use = counts[view.cells] >= 2
        if len(np.unique(view.cells[use])) < 2:
            raise NotTestable("two cells of two runs", "fewer")
        values, cells = view.values[use], view.cells[use]
        found = brown_forsythe(values, cells)
        spread = [float(values[cells == code].std(ddof=1)) for code in np.unique(cells)]
        ratio = max(spread) / min(spread) if min(spread) > 0 else float("nan")
        effect = None if np.isnan(ratio) else Effect(name="largest ratio of standard deviations", value=ratio)
        answer = answered(self, view, statistic=found.statistic, pvalue=found.pvalue, effect=effect)
        remark = "the honest comparison and Welch's interval allow unequal spreads; pooled ones do not"
        return msgspec.structs.replace(answer, reason=remark)
