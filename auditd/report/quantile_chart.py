"""The normal quantile plot with a simultaneous envelope."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from auditd.report.binning import Floats
from auditd.report.figure import drawn
from auditd.report.labels import figures, visible
from auditd.report.observed import Observed
from auditd.report.palette import BLUE, INK, MUTED
from auditd.report.picture import DataTable, Picture, undrawn
from auditd.report.quantile_envelope import N_MIN, Envelope, normal_envelope, quartile_units

if TYPE_CHECKING:
    from matplotlib.axes import Axes

N_ROWS = 60


def quantile_chart(observed: Observed) -> Picture:
    """Return the quantile plot of the deviations, in units of their interquartile range."""
    name = f"{observed.key}-quantiles"
    title = "Normal quantile plot"
    y = observed.kept
    n = len(y)
    if observed.is_constant:
        return undrawn(name, title, "the results are constant within every cell")
    if n < N_MIN:
        return undrawn(name, title, f"needs {N_MIN} runs, got {n}")
    envelope = normal_envelope(n)
    units = quartile_units(np.sort(y)[envelope.ranks - 1], envelope.ranks, n)
    if not np.isfinite(units).all():
        return undrawn(name, title, "more than half of the results are equal within their cells")
    finding = _finding(envelope, units)
    return Picture(
        name=name,
        title=title,
        finding=finding,
        caption=(
            "Ordered deviations from the cells' means against those of a normal law, in standard "
            "deviations judged by the "
            "quartiles. Shaded: 19 of 20 normal samples stay inside everywhere (equal local levels; "
            "Aldor-Noiman "
            "et al. 2013), if runs are independent and spread alike in all cells. The sequential audit "
            "does not rest on this."
            + (
                ""
                if len(envelope.ranks) == n
                else f" {len(envelope.ranks)} of {n:,} order statistics, all extremes."
            )
        ),
        svg=drawn(
            lambda axes: _draw(axes, envelope, units),
            name=name,
            title=f"{visible(observed.name)}: normal quantile plot",
            finding=finding,
        ),
        table=_table(envelope, units),
    )


def _finding(envelope: Envelope, units: Floats) -> str:
    above = int(np.sum(units > envelope.high))
    below = int(np.sum(units < envelope.low))
    if not above and not below:
        return "All points lie inside the envelope: no evidence against a normal law."
    tails = (units[0] < envelope.low[0], units[-1] > envelope.high[-1])
    heavy = {
        (True, True): "Both tails are heavier than a normal law's. ",
        (True, False): "The lower tail is heavier than a normal law's. ",
        (False, True): "The upper tail is heavier than a normal law's. ",
        (False, False): "",
    }[bool(tails[0]), bool(tails[1])]
    return (
        f"{above + below} of {len(units)} points lie outside the envelope, {above} above and {below} below. "
        f"{heavy}The lowest stands at {figures(float(units[0]))}, the highest at {figures(float(units[-1]))} "
        "standard deviations."
    )


def _draw(axes: Axes, envelope: Envelope, units: Floats) -> None:
    axes.fill_between(envelope.quantiles, envelope.low, envelope.high, color=MUTED, alpha=0.22, lw=0)
    ends = envelope.quantiles[[0, -1]]
    axes.plot(ends, ends, color=INK, lw=1.0)
    axes.plot(
        envelope.quantiles,
        units,
        "o",
        ms=3,
        markerfacecolor="none",
        markeredgecolor=BLUE,
        markeredgewidth=0.9,
    )
    axes.set_xlabel("normal quantile")
    axes.set_ylabel("deviation (sd)")


def _table(envelope: Envelope, units: Floats) -> DataTable:
    some = np.unique(np.linspace(0, len(units) - 1, min(N_ROWS, len(units))).astype(int)).tolist()
    return DataTable(
        headers=("rank", "normal quantile", "deviation", "envelope from", "to"),
        rows=tuple(
            (
                f"{envelope.ranks[k]:,}",
                figures(float(envelope.quantiles[k])),
                figures(float(units[k])),
                figures(float(envelope.low[k])),
                figures(float(envelope.high[k])),
            )
            for k in some
        ),
        note="Deviations in standard deviations judged by the quartiles.",
    )
