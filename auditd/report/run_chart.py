"""The run chart: every run in order, hosts by marker, levels of stretches, changes and runs set aside."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from auditd.report.binning import Bins, Floats, binned
from auditd.report.figure import drawn, legend_above
from auditd.report.labels import figures, short, visible
from auditd.report.observed import Flags, Observed
from auditd.report.palette import ACCENTS, BLUE, INK, MARKERS, MUTED, ORANGE
from auditd.report.picture import DataTable, Picture
from auditd.series.table import Coded

if TYPE_CHECKING:
    from matplotlib.axes import Axes

N_POINTS_MAX = 2000
"""Up to so many runs each is a point; beyond, stretches are drawn with mean and extremes."""
N_BINS = 240
"""Stretches drawn where there are more runs."""
N_ROWS = 60
"""Rows of the table behind."""
N_LEVELS_MAX = 8
"""Levels that have a marker of their own; the rest share one."""
N_LEVELS_BINNED = 4
N_STRETCHES = 12
"""Stretches whose level is drawn with its interval."""
N_STRETCH_MIN = 10
"""Fewest runs of a stretch that has an interval."""
Z_95 = 1.96
"""Two-sided 95 % point of the standard normal law."""


def run_chart(observed: Observed, along: str | None) -> Picture:
    """Return the run chart; `along` names the nuisance whose levels are told apart by marker."""
    coded = None if along is None else observed.nuisance.get(along)
    n = len(observed.deviation)
    stretches = _stretches(observed)
    title = f"{visible(observed.name)}: run chart"
    finding = _finding(observed, stretches)
    svg = drawn(
        lambda axes: _draw(axes, observed, coded, along, stretches),
        name=f"{observed.key}-runs",
        title=title,
        finding=finding,
        wide=True,
        size_pt=(760, 280),
    )
    how = (
        f"Each point is a run, {visible(along)} by shape. "
        if coded is not None and n <= N_POINTS_MAX
        else "Each point is a run. "
        if n <= N_POINTS_MAX
        else f"{n:,} runs in {N_BINS} stretches of equal counts: bars reach from the lowest to the highest "
        "run "
        "of each, so no extreme is lost; the line joins their means. "
    )
    caption = (
        f"{how}Thick steps: the level of each twelfth of the runs, with its 95 % interval at the worth of "
        "the runs "
        "(not their number). W: warning raised; dashed: most probable first run, shaded: runs that cannot be "
        "excluded. Crosses: set aside."
    )
    return Picture(
        name=f"{observed.key}-runs",
        title="Run chart",
        finding=finding,
        caption=caption,
        svg=svg,
        table=_table(observed),
        wide=True,
    )


def _stretches(observed: Observed) -> tuple[Bins, Floats] | None:
    """Return stretches of the analysed runs, and the half-widths of their levels' intervals."""
    kept = ~observed.aside
    y = observed.deviation[kept]
    n_bins = min(N_STRETCHES, len(y) // N_STRETCH_MIN)
    if n_bins < 2 or observed.is_constant:
        return None
    bins = binned(observed.place[kept], y, n_bins)
    ends = np.cumsum(bins.n)
    spread = np.array(
        [float(np.std(y[e - n : e], ddof=1)) for e, n in zip(ends.tolist(), bins.n.tolist(), strict=True)]
    )
    half = Z_95 * spread / np.sqrt(np.maximum(bins.n * (observed.worth or 1.0), 1.0))
    return bins, half


def _finding(observed: Observed, stretches: tuple[Bins, Floats] | None) -> str:
    if observed.is_constant:
        return "The results are constant within every cell; there is nothing to see in their order."
    parts = []
    if stretches is None:
        parts.append("Too few runs for levels of stretches.")
    else:
        bins, _ = stretches
        low, high = int(np.argmin(bins.mean)), int(np.argmax(bins.mean))
        spread = float(np.std(observed.kept))
        parts.append(
            f"Levels of stretches run from {figures(float(bins.mean[low]))} (places {bins.first[low]:.0f} to "
            f"{bins.last[low]:.0f}) to {figures(float(bins.mean[high]))} (places {bins.first[high]:.0f} to "
            f"{bins.last[high]:.0f}), where single runs spread by {figures(spread)} (standard deviation)."
        )
    for mark in observed.marks:
        since = "" if mark.since is None else f", most probably since place {mark.since:.0f}"
        at = "" if mark.raised is None else f" was raised at place {mark.raised:.0f}"
        parts.append(f"{mark.label}{at}{since}.")
    if not observed.marks:
        parts.append("No change is dated in it.")
    n_aside = int(observed.aside.sum())
    if n_aside:
        parts.append(f"{n_aside:,} runs are set aside.")
    return " ".join(parts)


def _draw(
    axes: Axes,
    observed: Observed,
    coded: Coded | None,
    along: str | None,
    stretches: tuple[Bins, Floats] | None,
) -> None:
    if len(observed.deviation) <= N_POINTS_MAX:
        _points(axes, observed, coded)
    else:
        _bars(axes, observed, coded)
    if stretches is not None:
        bins, half = stretches
        for k in range(len(bins.n)):
            ends = [bins.first[k], bins.last[k]]
            axes.fill_between(
                ends, bins.mean[k] - half[k], bins.mean[k] + half[k], color=INK, alpha=0.18, lw=0
            )
            axes.plot(ends, [bins.mean[k]] * 2, color=INK, lw=2.2, solid_capstyle="butt")
    _marks(axes, observed)
    axes.set_xlabel("place in the order")
    axes.set_ylabel(short(observed.axis, 44))
    handles, labels = axes.get_legend_handles_labels()
    if handles and along is not None:
        legend_above(axes, n_columns=min(len(labels), 9))


def _groups(coded: Coded | None, n: int, n_most: int) -> list[tuple[str, Flags]]:
    """Return the levels with the most runs and their runs; the others together."""
    if coded is None or n == 0:
        return [("", np.ones(n, dtype=bool))]
    counts = np.bincount(coded.codes, minlength=len(coded.levels))
    largest = sorted(np.argsort(-counts, kind="stable")[:n_most].tolist())
    found = [(short(coded.levels[code], 16), coded.codes == code) for code in largest if counts[code]]
    rest = ~np.isin(coded.codes, largest)
    if rest.any():
        found.append((f"{len(coded.levels) - len(largest):,} others", rest))
    return found


def _points(axes: Axes, observed: Observed, coded: Coded | None) -> None:
    for k, (label, here) in enumerate(_groups(coded, len(observed.deviation), N_LEVELS_MAX)):
        shown = here & ~observed.aside
        axes.plot(
            observed.place[shown],
            observed.deviation[shown],
            linestyle="none",
            marker=MARKERS[k % len(MARKERS)],
            markersize=3.4,
            markerfacecolor="none",
            markeredgecolor=ACCENTS[k % len(ACCENTS)],
            markeredgewidth=0.8,
            label=label or None,
        )
    if observed.aside.any():
        aside = observed.aside
        axes.plot(
            observed.place[aside],
            observed.deviation[aside],
            "x",
            color=MUTED,
            ms=3,
            mew=0.8,
            label="set aside",
        )


def _bars(axes: Axes, observed: Observed, coded: Coded | None) -> None:
    bins = binned(observed.place, observed.deviation, N_BINS)
    axes.vlines(bins.middle, bins.low, bins.high, color=MUTED, lw=1.2, alpha=0.55)
    axes.plot(bins.middle, bins.mean, color=BLUE, lw=1.0)
    if coded is None or len(coded.levels) < 2:
        return
    worst = _groups(coded, len(observed.deviation), len(coded.levels))
    means = [abs(float(observed.deviation[here].mean())) for _, here in worst]
    for k, index in enumerate(sorted(np.argsort(means)[::-1][:N_LEVELS_BINNED].tolist())):
        label, here = worst[index]
        part = binned(observed.place[here], observed.deviation[here], 40)
        axes.plot(
            part.middle,
            part.mean,
            linestyle="none",
            marker=MARKERS[k],
            ms=4,
            markerfacecolor="none",
            markeredgecolor=ACCENTS[k],
            label=f"{label} (means)",
        )


def _marks(axes: Axes, observed: Observed) -> None:
    for k, mark in enumerate(observed.marks[:6]):
        if mark.since_low is not None and mark.since_high is not None and mark.since_high > mark.since_low:
            axes.axvspan(mark.since_low, mark.since_high, color=ORANGE, alpha=0.14, lw=0)
        if mark.since is not None:
            axes.axvline(mark.since, color=ORANGE, lw=1.4, linestyle=(0, (4, 3)))
        if mark.raised is not None:
            axes.annotate(
                short(mark.label, 6),
                (mark.raised, 0.97 - 0.08 * (k % 3)),
                xycoords=("data", "axes fraction"),
                ha="center",
                va="top",
                fontsize=9.5,
                fontweight="bold",
                color=INK,
            )


def _table(observed: Observed) -> DataTable:
    if len(observed.deviation) == 0:
        return DataTable(headers=("runs",), rows=(("none",),))
    bins = binned(observed.place, observed.deviation, N_ROWS)
    aside = binned(observed.place, observed.aside.astype(np.float64), N_ROWS)
    rows = tuple(
        (
            f"{bins.first[k]:.0f}",
            f"{bins.last[k]:.0f}",
            f"{bins.n[k]:,}",
            figures(float(bins.mean[k])),
            figures(float(bins.low[k])),
            figures(float(bins.high[k])),
            f"{math.floor(aside.mean[k] * aside.n[k] + 0.5):,}",
        )
        for k in range(len(bins.n))
    )
    return DataTable(
        headers=("from place", "to place", "runs", "mean", "lowest", "highest", "set aside"),
        rows=rows,
        note=f"{visible(observed.axis)}; stretches of equal counts.",
    )
