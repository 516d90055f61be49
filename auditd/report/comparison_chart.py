"""Comparisons: naive and honest intervals against the margin."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from auditd.report.figure import drawn
from auditd.report.labels import figures, share, short, span, visible
from auditd.report.palette import BLUE, GREEN, INK, MUTED, ORANGE
from auditd.report.picture import DataTable, Picture, undrawn

if TYPE_CHECKING:
    from matplotlib.axes import Axes

N_DRAWN = 12
Compared = Mapping[str, Any]  # a comparison as `compare --json` shows it
_ROWS = (("naive", "naive_low", "naive_high", 0.22, MUTED, "s"),
         ("honest", "low", "high", 0.0, BLUE, "o"),
         ("at any look", "low_any", "high_any", -0.22, GREEN, "D"))  # fmt: skip


def comparison_chart(name: str, key: str, compared: Sequence[Compared]) -> Picture:
    """Return the picture of one response's comparisons."""
    title = "Comparisons"
    shown = [one for one in compared if one["estimable"] and one["low"] is not None][:N_DRAWN]
    finding = " ".join(f"{one['b']} less {one['a']}: {one['sentence']}" for one in compared)
    table = _table(compared)
    picture_name = f"{key}-comparisons"
    if not compared:
        return undrawn(picture_name, title, "no comparison of this response is planned")
    if not shown:
        return Picture(name=picture_name, title=title, finding=visible(finding), table=table, wide=True)
    height = 70.0 + 62.0 * len(shown)
    return Picture(
        name=picture_name,
        title=title,
        finding=visible(finding),
        caption=(
            "Naive: as if all runs were independent. Honest: under the dependence found, for one planned "
            "look. At any look: holds "
            "however often anyone looks. Shaded: the margin within which a difference does not matter."
        ),
        svg=drawn(
            lambda axes: _draw(axes, shown),
            name=picture_name,
            title=f"{visible(name)}: comparisons",
            finding=visible(finding),
            size_pt=(760.0, height),
            left_pt=210.0,
        ),
        table=table,
        wide=True,
    )


def _draw(axes: Axes, shown: Sequence[Compared]) -> None:
    margins = [one["margin"] for one in shown if one["margin"] is not None]
    if margins:
        axes.axvspan(-margins[0], margins[0], color=ORANGE, alpha=0.16, lw=0)
    axes.axvline(0.0, color=INK, lw=0.8)
    axes.grid(visible=False)
    for k, one in enumerate(shown):
        for words, low, high, offset, colour, marker in _ROWS:
            if one[low] is None or one[high] is None:
                continue
            y = -k + offset
            axes.plot([one[low], one[high]], [y, y], color=colour, lw=2.2, solid_capstyle="butt")
            axes.plot([one[low], one[high]], [y, y], "|", color=colour, ms=7, mew=1.6)
            middle = (one[low] + one[high]) / 2 if words == "naive" else one["estimate"]
            axes.plot(middle, y, marker, color=colour, ms=5, label=words if k == 0 else None)
    axes.set_yticks(
        [-k for k in range(len(shown))],
        [f"{short(one['b'], 30)}\nless {short(one['a'], 26)}" for one in shown],
    )
    axes.tick_params(axis="y", length=0, labelsize=9.5)
    axes.set_ylim(-len(shown) + 0.5, 0.5)
    axes.set_xlabel("difference on the audited scale")
    axes.legend(
        loc="lower left",
        bbox_to_anchor=(-0.01, 1.0),
        ncols=3,
        borderaxespad=0.2,
        handletextpad=0.3,
        columnspacing=1.2,
    )


def _table(compared: Sequence[Compared]) -> DataTable:
    return DataTable(
        headers=(
            "comparison", "", "estimate", "honest interval", "at any look", "naive interval", "confidence",
            "runs",
            "worth", "Hedges' g", "margin", "verdict",
        ),
        rows=tuple(_row(one) for one in compared),
        note="Differences on the audited scale.",
    )  # fmt: skip


def _row(one: Compared) -> tuple[str, ...]:
    return (
        visible(f"{one['b']} less {one['a']}"),
        "planned" if one["planned"] else "unplanned",
        figures(one["estimate"], 4),
        span(one["low"], one["high"], 4),
        span(one["low_any"], one["high_any"], 4),
        span(one["naive_low"], one["naive_high"], 4),
        "–"
        if one["confidence"] is None
        else share(one["confidence"])
        if one["confidence"] in {0.9, 0.95, 0.99}
        else f"{100 * one['confidence']:.2f} %",
        "–" if one["n"] is None else f"{one['n']:,}",
        figures(one["n_effective"]),
        f"{figures(one['hedges_g'])} ({span(one['g_low'], one['g_high'])})"
        if one["hedges_g"] is not None
        else "–",
        figures(one["margin"]),
        "cannot be estimated" if not one["estimable"] else one["verdict"] or "no margin stated",
    )
