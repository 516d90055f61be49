"""The six intraclass correlations of a table of targets by judges."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._groups import ROUNDING_UNITS
from auditd.stats._validate import Floats, check_varying, matrix, probability

SOURCE = (
    "Shrout & Fleiss (1979), Psychological Bulletin 86:420-428; McGraw & Wong (1996), Psychological Methods "
    "1:30-46"
)

Interval = tuple[float, float, float]

# At a correlation of −1/(k − 1) between k values that of their mean falls without limit: form 2 stays this
# share of it away.
NEAREST_TO_FLOOR = 1.0 - 1e-9
DF_LEAST = 0.1


@dataclass(frozen=True, kw_only=True)
class MeanSquares:
    """Mean squares of a table: rows (BMS), within rows (WMS), columns (JMS), error (EMS)."""

    n: int
    k: int
    rows: float
    within: float
    columns: float
    error: float


def intraclass(table: ArrayLike, *, confidence: float = 0.95) -> dict[str, Interval]:
    """Measure how alike the values of a row are, in the six classical forms, each with its interval.

    Parameters
    ----------
    table : shape (n targets, k judges), complete.
    confidence : of the intervals.

    Returns
    -------
    dict of (icc, low, high) under "1,1", "2,1", "3,1" (one value) and "1,k", "2,k", "3,k" (mean of k values).
    First digit: 1, each target has judges of its own; 2, the same judges, drawn from many, absolute
    agreement; 3, the same judges, these only, consistency. Values may be negative, and have no lower limit
    for means.

    Raises
    ------
    BadInput : not a table of finite numbers.
    NotTestable : fewer than two rows or columns, constant values, equal row means, or rows that agree without
        any error.

    Notes
    -----
    Assumes independent normal target effects and errors of one variance, and for form 2 normal judge effects
    without interaction. Intervals of forms 1 and 3 are exact then; those of form 2 rest on Satterthwaite's
    approximation and cover a little too seldom with few judges.

    References
    ----------
    Shrout & Fleiss (1979), Psychological Bulletin 86:420-428. McGraw & Wong (1996), Psychological Methods
    1:30-46, Table 7.
    """
    level = 1.0 - probability(confidence, "confidence")
    values = matrix(table, "table")
    if min(values.shape) < 2:
        raise NotTestable("at least two rows and two columns", f"a table of {values.shape}")
    check_varying(values.ravel(), "table")
    squares = mean_squares(values)
    of_one = (squares.n - 1, squares.n * (squares.k - 1))
    of_shared = (squares.n - 1, (squares.n - 1) * (squares.k - 1))
    agreement = _agreement(squares, level)
    return {
        "1,1": _single_form(squares.rows / squares.within, of_one, squares.k, level),
        "2,1": agreement,
        "3,1": _single_form(squares.rows / squares.error, of_shared, squares.k, level),
        "1,k": _mean_form(squares.rows / squares.within, of_one, level),
        "2,k": _of_means(agreement, squares.k),
        "3,k": _mean_form(squares.rows / squares.error, of_shared, level),
    }


def mean_squares(values: Floats) -> MeanSquares:
    """Mean squares of a complete table.

    Raises
    ------
    NotTestable : rows that do not differ, or values that agree without error.
    """
    n, k = values.shape
    centred = values - values[0, 0]
    centred = centred - centred.mean()
    rows, columns = centred.mean(axis=1), centred.mean(axis=0)
    error = centred - rows[:, None] - columns[None, :]
    unit = ROUNDING_UNITS * np.finfo(np.float64).eps * float(np.abs(centred).max())
    square_error = float(np.vdot(error, error))
    if square_error <= n * k * unit * unit:
        raise NotTestable("columns that differ by more than a constant", "columns that agree without error")
    square_rows = k * float(rows @ rows)
    if square_rows <= n * k * unit * unit:
        raise NotTestable("rows whose means differ", f"{n} rows with one mean")
    square_columns = n * float(columns @ columns)
    return MeanSquares(
        n=n, k=k, rows=square_rows / (n - 1), within=(square_columns + square_error) / (n * (k - 1)),
        columns=square_columns / (k - 1), error=square_error / ((n - 1) * (k - 1)),
    )  # fmt: skip


def _bounds(f: float, df: tuple[int, int], level: float) -> tuple[float, float, float]:
    from scipy.special import fdtri

    return f, f / float(fdtri(*df, 1.0 - level / 2)), f * float(fdtri(df[1], df[0], 1.0 - level / 2))


def _single_form(f: float, df: tuple[int, int], k: int, level: float) -> Interval:
    icc, low, high = ((v - 1.0) / (v + k - 1.0) for v in _bounds(f, df, level))
    return icc, low, high


def _mean_form(f: float, df: tuple[int, int], level: float) -> Interval:
    icc, low, high = (1.0 - 1.0 / v for v in _bounds(f, df, level))
    return icc, low, high


def _agreement(s: MeanSquares, level: float) -> Interval:
    """ICC(2,1), with the interval after Satterthwaite of Shrout & Fleiss (1979), p. 424."""
    from scipy.special import fdtri

    n, k = s.n, s.k
    floor = NEAREST_TO_FLOOR / (1 - k)
    total = s.rows + (k - 1) * s.error + k * (s.columns - s.error) / n
    icc = (s.rows - s.error) / total
    if icc <= floor:
        # The judges' variance is estimated below zero, and leaves too little in total: take it as 0.
        icc = max(floor, (s.rows - s.error) / (s.rows + (k - 1) * s.error))
    f_columns = s.columns / s.error
    a, b = k * icc * f_columns, n * (1 + (k - 1) * icc) - k * icc
    # Where rows hardly differ df falls to 0; below this F's point is past 1e30, and the limit moves no more.
    df = max(DF_LEAST, (k - 1) * (n - 1) * (a + b) ** 2 / ((n - 1) * a * a + b * b))
    f_low, f_high = float(fdtri(n - 1, df, 1.0 - level / 2)), float(fdtri(df, n - 1, 1.0 - level / 2))
    rest = k * s.columns + (k * n - k - n) * s.error
    low = n * (s.rows - f_low * s.error) / (f_low * rest + n * s.rows)
    high = n * (f_high * s.rows - s.error) / (rest + n * f_high * s.rows)
    return icc, max(floor, min(low, icc)), max(high, icc)


def _of_means(single: Interval, k: int) -> Interval:
    """Spearman and Brown's step from one value to the mean of k."""
    icc, low, high = (k * v / (1.0 + (k - 1) * v) for v in single)
    return icc, low, high
