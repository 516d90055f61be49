"""Level effects of a nuisance within cells: their variance, by the analysis of variance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Codes, Floats, Ints

MIN_DF = 1


@dataclass(frozen=True, kw_only=True)
class LevelEffects:
    """One nuisance within cells.

    between, within : mean squares. typical : runs a level and cell, n₀. df : of `between`, not more than
        levels − 1. df_within.
    concentration (n_cells,) : Σ over levels of (share of the cell's runs)². level_of : (n,) code of level
        within cell. means : of those codes.
    """

    name: str
    between: float
    within: float
    typical: float
    df: float
    df_within: float
    concentration: Floats
    level_of: Ints
    means: Floats

    def variance(self, dependence: float) -> float:
        """Variance of the level effects, given how much `dependence` within levels inflates their means."""
        return max(self.between - self.within * dependence, 0.0) / self.typical

    def variance_at(self, dependence: float, probability: Floats) -> Floats:
        """Quantiles of the level variance by the exact F interval (Searle 1971, section 9.9), not below 0."""
        from scipy.special import fdtri

        bound = fdtri(self.df, self.df_within, 1 - probability)
        expected = self.within * dependence
        return np.asarray(np.maximum(self.between / bound - expected, 0.0) / self.typical)

    def pvalue(self, dependence: float) -> float:
        """Upper tail of the F test with the error inflated by `dependence`."""
        from scipy.special import fdtrc

        expected = max(self.within * dependence, 1e-300)
        return float(fdtrc(self.df, self.df_within, self.between / expected))


def effects(
    name: str, residual: Floats, codes: Codes, cell: Ints, n_cells: int, n_removed: int = 0
) -> LevelEffects | None:
    """Analyse residuals by levels within cells; None where no cell has two levels, or no level two runs.

    n_removed : other means that were taken off the residuals, beyond those of the cells.
    """
    slot = cell * codes.n_levels + codes.codes
    present, level_of = np.unique(slot, return_inverse=True)
    owner = present // codes.n_levels
    count = np.bincount(level_of).astype(float)
    means = np.bincount(level_of, residual) / count
    runs = np.bincount(owner, count, n_cells)
    n, n_slots = float(len(residual)), len(present)
    df_slots = n_slots - int((runs > 0).sum())
    df_within = n - n_slots - n_removed
    if df_slots < MIN_DF or df_within < MIN_DF:
        return None
    within = float(((residual - means[level_of]) ** 2).sum()) / df_within
    between = float(count @ means**2) / df_slots
    squares = np.bincount(owner, count**2, n_cells)
    typical = (n - float((squares / np.maximum(runs, 1)).sum())) / df_slots
    return LevelEffects(
        name=name,
        between=between,
        within=within,
        typical=typical,
        df=float(min(df_slots, codes.n_levels - 1)),
        df_within=df_within,
        concentration=squares / np.maximum(runs, 1) ** 2,
        level_of=level_of,
        means=means,
    )
