"""Strength of association between two labels of each run."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from auditd.errors import NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, Integers, codes

SOURCE = (
    "Cramér (1946), Mathematical Methods of Statistics, 21.9; correction: Bergsma (2013), JKSS 42:323-328"
)


@dataclass(frozen=True, kw_only=True)
class CramersV(HypothesisTest):
    """Result of `cramers_v`; the statistic is V, from 0 (no association) to 1 (one label gives the other).

    Attributes
    ----------
    chi_squared, df : Pearson's statistic and its degrees of freedom, from which the p-value is taken.
    corrected : V with Bergsma's correction, which takes off what chance alone would give.
    smallest_expected : the smallest expected count; below about 5 the p-value is rough.
    """

    chi_squared: float
    df: int
    corrected: float
    smallest_expected: float


def cramers_v(a: Iterable[Any], b: Iterable[Any]) -> CramersV:
    """Measure how far one label determines another, and test whether they are unrelated.

    Null hypothesis: the labels are independent. Alternative: they are associated.

    Parameters
    ----------
    a, b : labels, shape (n,) each.

    Raises
    ------
    BadInput : not one-dimensional, other lengths, or missing labels.
    NotTestable : fewer than two values, or a single level of either label.

    Notes
    -----
    Assumes independent runs. V alone is biased upwards when levels are many and runs few, where `corrected`
    is not. The chi-squared p-value is rough where expected counts are below about 5, either way.

    References
    ----------
    Cramér (1946), Mathematical Methods of Statistics, 21.9. Bergsma (2013), A bias-correction for Cramér's V
    and Tschuprow's T, Journal of the Korean Statistical Society 42:323-328.
    """
    from scipy.special import chdtrc

    rows, row_labels = codes(a, "a")
    columns, column_labels = codes(b, "b", n=rows.size)
    n, r, c = rows.size, len(row_labels), len(column_labels)
    if min(r, c) < 2:
        raise NotTestable("at least two levels of each label", f"{r} of a and {c} of b")
    chi_squared, smallest = _chi_squared(rows, columns, r, c)
    df = (r - 1) * (c - 1)
    return CramersV(
        statistic=min(1.0, (chi_squared / n / (min(r, c) - 1)) ** 0.5), n=n, source=SOURCE,
        pvalue=float(chdtrc(df, chi_squared)), null="the labels are independent", chi_squared=chi_squared,
        df=df, corrected=_corrected(chi_squared / n, n, r, c), smallest_expected=smallest,
    )  # fmt: skip


def _chi_squared(rows: Integers, columns: Integers, r: int, c: int) -> tuple[float, float]:
    """Pearson's statistic from the cells that occur, so that many levels need no full table."""
    n = rows.size
    row_totals = np.bincount(rows, minlength=r).astype(np.float64)
    column_totals = np.bincount(columns, minlength=c).astype(np.float64)
    cells, observed = np.unique(rows * c + columns, return_counts=True)
    expected: Floats = row_totals[cells // c] * column_totals[cells % c] / n
    differences = observed - expected
    # An empty cell contributes what was expected in it.
    empty = max(0.0, n - float(expected.sum()))
    statistic = float((differences * differences / expected).sum()) + empty
    return statistic, float(row_totals.min() * column_totals.min()) / n


def _corrected(phi_squared: float, n: int, r: int, c: int) -> float:
    excess = max(0.0, phi_squared - (r - 1) * (c - 1) / (n - 1))
    effective = min(r - (r - 1) ** 2 / (n - 1), c - (c - 1) ** 2 / (n - 1))
    # As many levels as runs leave nothing to measure by.
    return min(1.0, (excess / (effective - 1.0)) ** 0.5) if effective > 1.0 else 0.0
