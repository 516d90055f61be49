"""The batch plot: the levels of a nuisance side by side, with their intraclass correlation."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from auditd.errors import AuditdError
from auditd.report.binning import Floats
from auditd.report.figure import drawn
from auditd.report.labels import figures, short, span, visible
from auditd.report.observed import Observed
from auditd.report.palette import BLUE, INK, MUTED
from auditd.report.picture import DataTable, Picture, undrawn

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from auditd.stats.one_way import OneWay

N_LEVELS_MAX = 16
"""Levels that are drawn: those with the lowest and the highest means, where there are more."""
N_ROWS = 200
Level = tuple[str, int, Floats]
"""Name, runs, and the five numbers: lowest, lower quartile, mean, upper quartile, highest."""


def batch_chart(observed: Observed, nuisance: str) -> Picture:
    """Return the batch plot along a nuisance."""
    from auditd.stats import one_way

    kept = ~observed.aside
    coded = observed.nuisance[nuisance]
    name = f"{observed.key}-batch-{list(observed.nuisance).index(nuisance)}"
    title = f"Batch plot by {visible(nuisance)}"
    codes, y = coded.codes[kept], observed.deviation[kept]
    present = np.unique(codes)
    if observed.is_constant:
        return undrawn(name, title, "the results are constant within every cell")
    if len(present) < 2:
        return undrawn(
            name, title, f"all runs have one level of {visible(nuisance)}; its effect cannot be seen"
        )
    levels = _levels(y, codes, coded.levels)
    try:
        found = one_way(y, codes)
    except AuditdError as error:
        return undrawn(name, title, str(error))
    finding = _finding(found, levels, nuisance)
    some = _extreme(levels)
    return Picture(
        name=name,
        title=title,
        finding=finding,
        caption=(
            "Bars: lowest to highest run; boxes: middle half; points: means, less the cells' own levels. "
            "ICC: one-way analysis of "
            "variance; where cells and levels do not meet, it mixes both."
            + ("" if len(some) == len(levels) else f" {len(some)} of {len(levels):,} levels: lowest and "
                "highest means.")
        ),
        svg=drawn(
            lambda axes: _draw(axes, some, observed),
            name=name,
            title=f"{visible(observed.name)}: batch plot by {visible(nuisance)}",
            finding=finding,
        ),
        table=DataTable(
            headers=(
                visible(nuisance), "runs", "mean", "lowest", "lower quartile", "upper quartile", "highest",
            ),
            rows=tuple(
                (
                    visible(level), f"{n:,}", figures(float(five[2])), figures(float(five[0])),
                    figures(float(five[1])), figures(float(five[3])), figures(float(five[4])),
                )
                for level, n, five in levels[:N_ROWS]
            ),
            note="" if len(levels) <= N_ROWS else f"The first {N_ROWS} of {len(levels):,} levels.",
        ),
    )  # fmt: skip


def _levels(y: Floats, codes: np.ndarray, names: tuple[str, ...]) -> list[Level]:
    order = np.argsort(codes, kind="stable")
    cuts = np.flatnonzero(np.diff(codes[order])) + 1
    found = []
    for part in np.split(order, cuts):
        here = y[part]
        five = np.array([*np.quantile(here, [0, 0.25]), here.mean(), *np.quantile(here, [0.75, 1])])
        found.append((names[int(codes[part[0]])], len(part), five))
    return found


def _extreme(levels: list[Level]) -> list[Level]:
    if len(levels) <= N_LEVELS_MAX:
        return levels
    by_mean = sorted(levels, key=lambda level: float(level[2][2]))
    return [*by_mean[: N_LEVELS_MAX // 2], *by_mean[-N_LEVELS_MAX // 2 :]]


def _finding(found: OneWay, levels: list[Level], nuisance: str) -> str:
    low = min(levels, key=lambda level: float(level[2][2]))
    high = max(levels, key=lambda level: float(level[2][2]))
    return (
        f"Intraclass correlation {figures(found.icc)} (95 % interval "
        f"{span(found.icc_low, found.icc_high)}) over "
        f"{len(levels):,} levels of {visible(nuisance)}. Lowest mean: {short(low[0])} at "
        f"{figures(float(low[2][2]))} "
        f"({low[1]:,} runs); highest: {short(high[0])} at {figures(float(high[2][2]))} ({high[1]:,} runs)."
    )


def _draw(axes: Axes, levels: list[Level], observed: Observed) -> None:
    axes.axhline(0.0, color=INK, lw=0.8)
    for k, (_, _, five) in enumerate(levels):
        axes.vlines(k, five[0], five[4], color=MUTED, lw=1.2)
        axes.fill_between([k - 0.28, k + 0.28], five[1], five[3], color=BLUE, alpha=0.25, lw=0)
        axes.plot([k - 0.28, k + 0.28], [five[2]] * 2, color=BLUE, lw=1.6)
        axes.plot(k, five[2], "D", color=BLUE, ms=4.5)
    axes.set_xlim(-0.6, len(levels) - 0.4)
    many = len(levels) > 6 or any(len(level[0]) > 9 for level in levels)
    axes.set_xticks(
        range(len(levels)),
        [short(level[0], 8 if many else 14) for level in levels],
        rotation=35 if many else 0,
        ha="right" if many else "center",
        fontsize=8.5 if many else 10,
    )
    axes.set_ylabel(short(observed.axis, 32))
