"""Wald-Wolfowitz runs test about a cut-off."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import BadInput, NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import number, vector


@dataclass(frozen=True, kw_only=True)
class RunsTest(HypothesisTest):
    """Result of `runs_test`: also the runs counted and expected, their deviation, and the cut-off used."""

    n_runs: int
    expected_runs: float
    sd_runs: float
    n_above: int
    n_below: int
    cutoff: float


def runs_test(x: ArrayLike, cutoff: str | float = "median") -> RunsTest:
    """Detect clustering or alternation about a level by counting unbroken stretches above and below it.

    Null hypothesis: the values above and below the cut-off come in random order. Alternative, two-sided: they
    cluster (fewer runs, negative z) or alternate (more runs, positive z).

    Parameters
    ----------
    x : (n,) values in the order of the runs.
    cutoff : "median", "mean" or a number. A value equal to the cut-off counts as above, as in the e-Handbook.

    Returns
    -------
    RunsTest
        `.statistic` z without continuity correction, two-sided normal `.pvalue`, `.n_runs`, `.expected_runs`.

    Raises
    ------
    BadInput : malformed values or cut-off.
    NotTestable : fewer than 4 values, constant ones, or all on one side of the cut-off.

    Assumptions
    -----------
    None about the law of the values. With coarse values many equal the median and the verdict rests on the
    rule for ties. Below about 10 values a side the normal approximation is rough, either way.

    References
    ----------
    Wald, A. and Wolfowitz, J. (1940), Ann. Math. Stat. 11:147-162. NIST/SEMATECH e-Handbook, section
    1.3.5.13.
    """
    values = vector(x, "x", n_min=4, varying=True)
    if isinstance(cutoff, str):
        if cutoff not in ("median", "mean"):
            raise BadInput(f'cutoff is {cutoff!r}; "median", "mean" or a number is expected')
        level = float(np.median(values) if cutoff == "median" else values.mean())
    else:
        level = number(cutoff, "cutoff")
    above = values >= level
    n = values.size
    n_above = int(np.count_nonzero(above))
    n_below = n - n_above
    if n_above == 0 or n_below == 0:
        raise NotTestable("values on both sides of the cut-off", f"all {n} on one side of {level:.6g}")
    n_runs = 1 + int(np.count_nonzero(above[1:] != above[:-1]))
    twice = 2.0 * n_above * n_below
    expected = twice / n + 1.0
    sd = math.sqrt(twice * (twice - n) / (float(n) * n * (n - 1.0)))
    z = (n_runs - expected) / sd
    return RunsTest(
        statistic=z,
        n=n,
        source="Wald & Wolfowitz (1940), Ann. Math. Stat. 11:147; NIST/SEMATECH e-Handbook 1.3.5.13",
        pvalue=math.erfc(abs(z) / math.sqrt(2.0)),
        null="values above and below the cut-off come in random order",
        n_runs=n_runs,
        expected_runs=expected,
        sd_runs=sd,
        n_above=n_above,
        n_below=n_below,
        cutoff=level,
    )
