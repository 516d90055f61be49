"""Estimators and tests on arrays, and nothing else: no store, no plan, no clock.

Every function takes NumPy arrays (or what converts to them) and returns a frozen result with `.statistic`,
`.n` and `.source`; tests also have `.pvalue` and `.null`. Malformed input raises `BadInput`, too little data
`NotTestable`. A function stands in the module of its own name and is loaded when it is first used, so that
importing this package imports neither scipy nor statsmodels.
"""

from __future__ import annotations

import importlib
import sys
import types
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from auditd.stats.anderson_darling import anderson_darling
    from auditd.stats.autocorrelation import autocorrelation
    from auditd.stats.bartlett import bartlett
    from auditd.stats.breusch_godfrey import breusch_godfrey
    from auditd.stats.brown_forsythe import brown_forsythe
    from auditd.stats.cluster_covariance import cluster_covariance
    from auditd.stats.cramers_v import cramers_v
    from auditd.stats.cusum import cusum
    from auditd.stats.cusum_arl import cusum_arl
    from auditd.stats.durbin_watson import durbin_watson
    from auditd.stats.durbin_watson_bounds import durbin_watson_bounds
    from auditd.stats.equivalence import equivalence
    from auditd.stats.ewma import ewma
    from auditd.stats.ewma_arl import ewma_arl
    from auditd.stats.fisher_g import fisher_g
    from auditd.stats.generalized_esd import generalized_esd
    from auditd.stats.grubbs import grubbs
    from auditd.stats.hedges_g import hedges_g
    from auditd.stats.integrated_time import integrated_time
    from auditd.stats.intraclass import intraclass
    from auditd.stats.kruskal_wallis import kruskal_wallis
    from auditd.stats.level_order import level_order
    from auditd.stats.levene import levene
    from auditd.stats.ljung_box import ljung_box
    from auditd.stats.lomb_scargle import lomb_scargle
    from auditd.stats.mann_kendall import mann_kendall
    from auditd.stats.newey_west import newey_west
    from auditd.stats.one_way import one_way
    from auditd.stats.pettitt import pettitt
    from auditd.stats.runs_test import runs_test
    from auditd.stats.shapiro_wilk import shapiro_wilk
    from auditd.stats.variance_components import variance_components
    from auditd.stats.von_neumann_rank import von_neumann_rank
    from auditd.stats.welch_anova import welch_anova

__all__ = [
    "anderson_darling",
    "autocorrelation",
    "bartlett",
    "breusch_godfrey",
    "brown_forsythe",
    "cluster_covariance",
    "cramers_v",
    "cusum",
    "cusum_arl",
    "durbin_watson",
    "durbin_watson_bounds",
    "equivalence",
    "ewma",
    "ewma_arl",
    "fisher_g",
    "generalized_esd",
    "grubbs",
    "hedges_g",
    "integrated_time",
    "intraclass",
    "kruskal_wallis",
    "level_order",
    "levene",
    "ljung_box",
    "lomb_scargle",
    "mann_kendall",
    "newey_west",
    "one_way",
    "pettitt",
    "runs_test",
    "shapiro_wilk",
    "variance_components",
    "von_neumann_rank",
    "welch_anova",
]

# name of the function -> module that has it
_MODULES = {
    "anderson_darling": "auditd.stats.anderson_darling",
    "autocorrelation": "auditd.stats.autocorrelation",
    "bartlett": "auditd.stats.bartlett",
    "breusch_godfrey": "auditd.stats.breusch_godfrey",
    "brown_forsythe": "auditd.stats.brown_forsythe",
    "cluster_covariance": "auditd.stats.cluster_covariance",
    "cramers_v": "auditd.stats.cramers_v",
    "cusum": "auditd.stats.cusum",
    "cusum_arl": "auditd.stats.cusum_arl",
    "durbin_watson": "auditd.stats.durbin_watson",
    "durbin_watson_bounds": "auditd.stats.durbin_watson_bounds",
    "equivalence": "auditd.stats.equivalence",
    "ewma": "auditd.stats.ewma",
    "ewma_arl": "auditd.stats.ewma_arl",
    "fisher_g": "auditd.stats.fisher_g",
    "generalized_esd": "auditd.stats.generalized_esd",
    "grubbs": "auditd.stats.grubbs",
    "hedges_g": "auditd.stats.hedges_g",
    "integrated_time": "auditd.stats.integrated_time",
    "intraclass": "auditd.stats.intraclass",
    "kruskal_wallis": "auditd.stats.kruskal_wallis",
    "level_order": "auditd.stats.level_order",
    "levene": "auditd.stats.levene",
    "ljung_box": "auditd.stats.ljung_box",
    "lomb_scargle": "auditd.stats.lomb_scargle",
    "mann_kendall": "auditd.stats.mann_kendall",
    "newey_west": "auditd.stats.newey_west",
    "one_way": "auditd.stats.one_way",
    "pettitt": "auditd.stats.pettitt",
    "runs_test": "auditd.stats.runs_test",
    "shapiro_wilk": "auditd.stats.shapiro_wilk",
    "variance_components": "auditd.stats.variance_components",
    "von_neumann_rank": "auditd.stats.von_neumann_rank",
    "welch_anova": "auditd.stats.welch_anova",
}


def __getattr__(name: str) -> Any:  # Any: each function has its own type, stated above for type checkers
    """Load a listed function when it is first asked for (PEP 562)."""
    if name not in _MODULES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(importlib.import_module(_MODULES[name]), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])


class _FunctionsFirst(types.ModuleType):
    """Importing a submodule binds the module to the package's name for it; the function must win."""

    def __setattr__(self, name: str, value: object) -> None:
        if name in _MODULES and isinstance(value, types.ModuleType):
            value = getattr(value, name, value)
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _FunctionsFirst
