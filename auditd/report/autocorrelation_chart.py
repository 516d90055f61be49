"""Autocorrelation of the deviations in order, lag by lag, with limits for independence."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from auditd.errors import AuditdError
from auditd.report.figure import drawn
from auditd.report.labels import figures, visible
from auditd.report.observed import Observed
from auditd.report.palette import BLUE, INK, ORANGE
from auditd.report.picture import DataTable, Picture, undrawn

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from auditd.stats.autocorrelation import Autocorrelation

N_LAGS = 40
LIMIT_Z = 1.96
"""Two-sided 95 % point of the standard normal law: limits under independence are ± so many / √n."""


def autocorrelation_chart(observed: Observed) -> Picture:
    """Return the correlogram."""
    from auditd.stats import autocorrelation

    name = f"{observed.key}-acf"
    kept = observed.kept
    lags = min(N_LAGS, len(kept) // 4)
    if observed.is_constant:
        return undrawn(name, "Autocorrelation", "the results are constant within every cell")
    if lags < 1:
        return undrawn(name, "Autocorrelation", f"needs 4 runs, got {len(kept)}")
    try:
        found = autocorrelation(kept, lags)
    except AuditdError as error:
        return undrawn(name, "Autocorrelation", str(error))
    limit = LIMIT_Z / math.sqrt(found.n)
    finding = _finding(found, limit)
    return Picture(
        name=name,
        title="Autocorrelation",
        finding=finding,
        caption=(
            "Correlation of runs with the runs so many places before. Dashed: ± 1.96/√n, between which 19 "
            "of 20 "
            "lags of independent runs lie (each lag by itself). Source: Bartlett (1946)."
        ),
        svg=drawn(
            lambda axes: _draw(axes, found, limit),
            name=name,
            title=f"{visible(observed.name)}: autocorrelation",
            finding=finding,
        ),
        table=DataTable(
            headers=("lag", "correlation", "lower limit", "upper limit"),
            rows=tuple(
                (
                    str(k),
                    figures(float(found.r[k])),
                    figures(float(found.low[k])),
                    figures(float(found.high[k])),
                )
                for k in range(1, lags + 1)
            ),
            note="Limits: Bartlett's, of the true correlation at each lag by itself.",
        ),
    )


def _finding(found: Autocorrelation, limit: float) -> str:
    r = found.r[1:]
    outside = int(np.sum(np.abs(r) > limit))
    largest = int(np.argmax(np.abs(r)))
    return (
        f"At lag 1 the correlation is {figures(float(r[0]))}; {outside} of {len(r)} lags lie beyond "
        f"± {figures(limit)}, where independent runs put about {figures(0.05 * len(r), 2)}. The largest is "
        f"{figures(float(r[largest]))} at lag {largest + 1}."
    )


def _draw(axes: Axes, found: Autocorrelation, limit: float) -> None:
    lags = np.arange(1, len(found.r))
    axes.vlines(lags, 0.0, found.r[1:], color=BLUE, lw=2)
    axes.plot(lags, found.r[1:], "o", color=BLUE, ms=3.5)
    axes.axhline(0.0, color=INK, lw=0.8)
    for sign in (-1, 1):
        axes.axhline(sign * limit, color=ORANGE, lw=1.2, linestyle=(0, (4, 3)))
    bound = max(float(np.abs(found.r[1:]).max()), limit) * 1.15
    axes.set_ylim(-bound, bound)
    axes.set_xlabel("lag (places in the order)")
    axes.set_ylabel("correlation")
