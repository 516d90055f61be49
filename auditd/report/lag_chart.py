"""The lag plot: each run against the run before it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from auditd.report.binning import Floats
from auditd.report.figure import drawn
from auditd.report.labels import figures, visible
from auditd.report.observed import Observed
from auditd.report.palette import BLUE, INK, MUTED, ORANGE
from auditd.report.picture import DataTable, Picture, undrawn

if TYPE_CHECKING:
    from matplotlib.axes import Axes

N_POINTS_MAX = 1500
N_SQUARES = 30
"""Squares a side where runs are counted in squares."""
N_SLICES = 20
"""Slices of the earlier run, whose later runs' mean is drawn and tabulated."""


def lag_chart(observed: Observed) -> Picture:
    """Return the lag plot at lag 1."""
    name = f"{observed.key}-lag"
    y = observed.kept
    if observed.is_constant:
        return undrawn(name, "Lag plot", "the results are constant within every cell")
    if len(y) < 8:
        return undrawn(name, "Lag plot", f"needs 8 runs, got {len(y)}")
    before, after = y[:-1], y[1:]
    slices = _slices(before, after)
    correlation = float(np.corrcoef(before, after)[0, 1]) if np.ptp(before) and np.ptp(after) else 0.0
    finding = (
        f"From the lowest to the highest slice of the earlier run, the mean of the next run goes from "
        f"{figures(slices[0][2])} to {figures(slices[-1][2])}; correlation {figures(correlation)}."
    )
    how = (
        "Each point is a pair of neighbours."
        if len(before) <= N_POINTS_MAX
        else f"{len(before):,} pairs counted in squares; the area of a mark grows with its count, single "
        "pairs stay visible."
    )
    return Picture(
        name=name,
        title="Lag plot",
        finding=finding,
        caption=f"{how} Line: mean of the next run by slices of the earlier one; flat when runs do not "
        "remember.",
        svg=drawn(
            lambda axes: _draw(axes, before, after, slices),
            name=name,
            title=f"{visible(observed.name)}: lag plot",
            finding=finding,
        ),
        table=DataTable(
            headers=("earlier run, mean", "pairs", "next run, mean", "next run, lowest", "next run, highest"),
            rows=tuple(
                (figures(mean), f"{n:,}", figures(then), figures(low), figures(high))
                for mean, n, then, low, high in slices
            ),
            note="Slices of equal counts by the value of the earlier run.",
        ),
    )


def _slices(before: Floats, after: Floats) -> list[tuple[float, int, float, float, float]]:
    order = np.argsort(before, kind="stable")
    return [
        (
            float(before[part].mean()),
            len(part),
            float(after[part].mean()),
            float(after[part].min()),
            float(after[part].max()),
        )
        for part in np.array_split(order, min(N_SLICES, max(len(order) // 10, 2)))
    ]


def _draw(
    axes: Axes, before: Floats, after: Floats, slices: list[tuple[float, int, float, float, float]]
) -> None:
    if len(before) <= N_POINTS_MAX:
        axes.plot(
            before, after, "o", ms=2.6, markerfacecolor="none", markeredgecolor=BLUE, markeredgewidth=0.7
        )
    else:
        counts, xs, ys = np.histogram2d(before, after, bins=N_SQUARES)
        i, j = np.nonzero(counts)
        size = 4.0 + 80.0 * counts[i, j] / counts.max()
        axes.scatter((xs[i] + xs[i + 1]) / 2, (ys[j] + ys[j + 1]) / 2, s=size, marker="s", color=BLUE, lw=0)
    axes.axhline(0.0, color=MUTED, lw=0.8)
    axes.axvline(0.0, color=MUTED, lw=0.8)
    earlier = [one[0] for one in slices]
    axes.plot(earlier, [one[2] for one in slices], color=INK, lw=3.2)
    axes.plot(earlier, [one[2] for one in slices], color=ORANGE, lw=1.8)
    axes.set_xlabel("deviation of a run")
    axes.set_ylabel("deviation of the next run")
