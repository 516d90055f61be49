"""Is there correlation at any of the first lags? By the Ljung-Box statistic of the scores."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from auditd.checks.answer import Answer, Family
from auditd.checks.asked import answered
from auditd.checks.check import Unit
from auditd.checks.permutation import permutation_pvalue
from auditd.checks.serial_von_neumann import correlation_at
from auditd.checks.view import View
from auditd.series.table import Floats

N_LAGS = 10
"""Lags asked, or a fifth of the runs if fewer (Hyndman & Athanasopoulos, Forecasting, section 5.4)."""


class SerialLjungBox:
    """Detect correlation at several lags in a response by the Ljung-Box portmanteau statistic.

    Null hypothesis: within cells scores are uncorrelated at lags 1 to 10. Alternative: some are correlated,
    either way. Assumptions: scores are about normal, which they are by construction; what ties the few
    scores of a cell together is taken off. A step or trend shows here too.
    """

    name: ClassVar[str] = "ljung_box"
    family: ClassVar[Family] = "dependence"
    null: ClassVar[str] = "within cells, scores are uncorrelated at the first lags"
    assumes: ClassVar[str] = "order and labels do not depend on results; any law; a step or trend shows too"
    source: ClassVar[str] = "Ljung & Box (1978), Biometrika 65:297-303"
    n_min: ClassVar[int] = 20
    needs_order: ClassVar[bool] = True
    tiny: ClassVar[float] = 0.05
    unit: ClassVar[Unit] = "share"

    def ask(self, view: View) -> Answer:
        """Return the answer with the largest correlation; its interval allows for the choice among lags."""
        from scipy.special import chdtrc, ndtri

        lags = min(N_LAGS, view.n // 5)
        products = _products(view.scores[None, :], lags)[0]
        products += [view.tied(lag) for lag in range(1, lags + 1)]
        statistic = float(_portmanteau(products[None, :], view.n)[0])
        pvalue = float(chdtrc(lags, statistic))
        if view.needs_permutation:
            null = _portmanteau(_products(view.permutations(), lags), view.n)
            observed = float(_portmanteau(_products(view.scores[None, :], lags), view.n)[0])
            pvalue = permutation_pvalue(observed, null, "gamma")
        at = int(np.argmax(np.abs(products))) + 1
        effect = correlation_at(view, at, z=float(ndtri(1 - 0.025 / lags)))
        return answered(self, view, statistic=statistic, pvalue=pvalue, effect=effect)


def _products(rows: Floats, lags: int) -> Floats:
    """Return Σ s(t) s(t + k) for k = 1 … lags, for each row: (rows, lags)."""
    n = rows.shape[1]
    return np.stack(
        [np.einsum("ij,ij->i", rows[:, : n - k], rows[:, k:]) for k in range(1, lags + 1)], axis=1
    )


def _portmanteau(products: Floats, n: int) -> Floats:
    """Return n (n + 2) Σ r_k² / (n − k); scores have mean square 1."""
    lags = np.arange(1, products.shape[1] + 1)
    return np.asarray(n * (n + 2.0) * ((products / n) ** 2 / (n - lags)).sum(axis=1))
