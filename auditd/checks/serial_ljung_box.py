"""Is there correlation at any of the first lags? By the Ljung-Box statistic of the scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.serial_von_neumann import lag_one
from auditd.checks.view import View, permutation_pvalue

N_LAGS = 10
"""Lags asked, or a fifth of the runs if fewer (Hyndman & Athanasopoulos, Forecasting, section 5.4)."""


class SerialLjungBox:
    """Detect correlation at several lags in a response by the Ljung-Box portmanteau statistic.

    Null hypothesis: within cells scores are uncorrelated at lags 1 to 10. Alternative: some are correlated.
    Assumptions: scores are about normal, which they are by construction.
    """

    name: ClassVar[str] = "ljung_box"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, scores are uncorrelated at the first lags"
    assumes: ClassVar[str] = "order and labels do not depend on results; any law"
    source: ClassVar[str] = "Ljung & Box (1978), Biometrika 65:297-303"
    n_min: ClassVar[int] = 20

    def ask(self, view: View) -> Answer:
        """Return the answer; p by chi-squared, or by permutation where cells are small."""
        from auditd.stats import ljung_box

        lags = min(N_LAGS, view.n // 5)
        found = ljung_box(view.scores, lags)
        pvalue = found.pvalue
        if view.needs_permutation:
            null = np.array([ljung_box(scores, lags).statistic for scores in view.permutations()])
            pvalue = permutation_pvalue(found.statistic, null)
        return answered(self, view, statistic=found.statistic, pvalue=pvalue, effect=lag_one(view))
