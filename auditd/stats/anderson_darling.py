"""Normality by the distance between the distribution of values and the normal one, tails included."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Floats, vector

SOURCE = "Anderson & Darling (1954), JASA 49:765-769; p-value: D'Agostino & Stephens (1986), Table 4.9"
N_MIN = 8
# Coefficients of exp(a + b·A + c·A²), A modified for n, by D'Agostino & Stephens (1986), Table 4.9: for A
# below the bound. The first two give 1 − p.
LOWER = ((0.2, (-13.436, 101.14, -223.73)), (0.34, (-8.318, 42.796, -59.938)))
UPPER = ((0.6, (0.9177, -4.279, -1.38)), (math.inf, (1.2937, -5.709, 0.0186)))
# The last parabola turns upwards again; p is held from here on, at about 3.7e-24.
A_HELD = 10.0


@dataclass(frozen=True, kw_only=True)
class AndersonDarling(HypothesisTest):
    """Result of `anderson_darling`; the statistic is A².

    Attributes
    ----------
    modified : A²(1 + 0.75/n + 2.25/n²), from which the p-value is taken.
    """

    modified: float


def anderson_darling(x: ArrayLike) -> AndersonDarling:
    """Test whether values come from a normal distribution, with weight on its tails.

    Null hypothesis: values are normal, of any mean and variance. Alternative: they are not (large A²).

    Parameters
    ----------
    x : values, shape (n,), at least 8.

    Raises
    ------
    BadInput : values not finite or not one-dimensional.
    NotTestable : fewer than 8 values, or constant ones.

    Notes
    -----
    Assumes independent values of one distribution. Rounding to few digits and serial dependence raise the
    false alarms. P-values below 4e-24 are given as that. At thousands of values it finds departures that
    matter to no mean.

    References
    ----------
    Anderson & Darling (1954), Journal of the American Statistical Association 49:765-769. D'Agostino &
    Stephens (1986), Goodness-of-Fit Techniques, 4.8.5 and Table 4.9 (mean and variance estimated).
    """
    values = vector(x, "x", n_min=N_MIN, varying=True)
    n = values.size
    statistic = _distance(np.sort(values))
    modified = statistic * (1.0 + 0.75 / n + 2.25 / (n * n))
    return AndersonDarling(
        statistic=statistic, n=n, source=SOURCE, pvalue=_pvalue(modified), null="values are normal",
        modified=modified,
    )  # fmt: skip


def _distance(ordered: Floats) -> float:
    from scipy.special import log_ndtr

    n = ordered.size
    centred = ordered - ordered[n // 2]
    scale = max(-float(centred[0]), float(centred[-1]))
    centred = centred / scale
    centred -= centred.mean()
    z = centred / math.sqrt(float(centred @ centred) / (n - 1))
    odd = np.arange(1, 2 * n, 2)
    return -n - float(odd @ (log_ndtr(z) + log_ndtr(-z[::-1]))) / n


def _pvalue(modified: float) -> float:
    a = min(modified, A_HELD)
    for rows, complement in ((LOWER, True), (UPPER, False)):
        for bound, (c0, c1, c2) in rows:
            if a < bound:
                tail = math.exp(c0 + c1 * a + c2 * a * a)
                return 1.0 - tail if complement else tail
    return 0.0
