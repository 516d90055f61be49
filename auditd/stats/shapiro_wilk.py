"""Normality by the correlation of ordered values with normal scores."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import vector

SOURCE = "Shapiro & Wilk (1965), Biometrika 52:591-611; Royston (1995), Applied Statistics 44:547-551, AS R94"
# AS R94 fits the p-value for 3 to 5000 values and says nothing beyond.
N_MIN, N_MAX = 3, 5000


def shapiro_wilk(x: ArrayLike) -> HypothesisTest:
    """Test whether values come from a normal distribution.

    Null hypothesis: values are normal, of any mean and variance. Alternative: they are not (small W).

    Parameters
    ----------
    x : values, shape (n,), 3 to 5000 of them.

    Raises
    ------
    BadInput : values not finite or not one-dimensional.
    NotTestable : fewer than 3 or more than 5000 values, or constant ones.

    Notes
    -----
    Assumes independent values of one distribution. Ties and rounding raise the false alarms, serial
    dependence does so too. At thousands of values it finds departures that matter to no mean;
    `anderson_darling` takes any number.

    References
    ----------
    Shapiro & Wilk (1965), Biometrika 52:591-611. Royston (1995), Remark AS R94, Applied Statistics
    44:547-551.
    """
    from scipy.stats import shapiro

    values = vector(x, "x", n_min=N_MIN, varying=True)
    if values.size > N_MAX:
        raise NotTestable(
            f"at most {N_MAX} values of x (Royston's approximation ends there)", f"{values.size}"
        )
    scaled = values - float(np.median(values))
    statistic, pvalue = shapiro(scaled / float(np.abs(scaled).max()))
    return HypothesisTest(
        statistic=min(1.0, float(statistic)), n=values.size, source=SOURCE,
        pvalue=min(1.0, max(0.0, float(pvalue))), null="values are normal",
    )  # fmt: skip
