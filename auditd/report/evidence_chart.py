"""The e-processes over the campaign against their thresholds: when the evidence arose."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from auditd.report.figure import drawn, legend_above
from auditd.report.labels import figures, short, visible
from auditd.report.observed import Mark
from auditd.report.palette import ACCENTS, INK, ORANGE
from auditd.report.picture import DataTable, Picture, undrawn

if TYPE_CHECKING:
    from matplotlib.axes import Axes

N_FAMILIES = 4
"""Families drawn: those whose evidence rose highest."""
DASHES: tuple[object, ...] = ("-", (0, (5, 2)), (0, (1.5, 1.5)), (0, (6, 2, 1.5, 2)))
N_ROWS = 40
LN_10 = math.log(10.0)


@dataclass(frozen=True, kw_only=True)
class EvidencePath:
    """One epoch's e-processes of one response: the highest log e-value of each stretch of `width` runs.

    `families` holds one path a family; `mean` that of their mean over all that is asked; thresholds are
    natural logarithms.
    """

    epoch: int
    first: int
    width: int
    mean: Sequence[float]
    families: Mapping[str, Sequence[float]]
    threshold_first: float
    threshold_own: float

    def ends(self) -> list[int]:
        """Return the place of each stretch's last run."""
        return [self.first + (k + 1) * self.width - 1 for k in range(len(self.mean))]


def evidence_chart(name: str, key: str, paths: Sequence[EvidencePath], marks: Sequence[Mark]) -> Picture:
    """Return the picture of one response's e-processes over all epochs that are kept."""
    title = "Evidence over the campaign"
    drawn_paths = [path for path in paths if path.mean]
    if not drawn_paths:
        return undrawn(
            f"{key}-evidence", title, "no run has been scored, or this is withheld (see what was not checked)"
        )
    leaders = _leaders(drawn_paths)
    finding = _finding(drawn_paths, leaders)
    return Picture(
        name=f"{key}-evidence",
        title=title,
        finding=finding,
        caption=(
            "Evidence against independence on a logarithmic scale: 2 means 100 to 1. Thickest line: mean "
            "of all "
            "that is asked; the first "
            "warning comes when it reaches the lower dashed line, further ones when a family reaches the "
            "upper. If runs were "
            "exchangeable, the chance that it is ever reached is at most the alarm budget, however often "
            "anyone looks (Ville 1939). "
            "Each point is the highest value of its stretch."
        ),
        svg=drawn(
            lambda axes: _draw(axes, drawn_paths, leaders, marks),
            name=f"{key}-evidence",
            title=f"{visible(name)}: evidence over the campaign",
            finding=finding,
            wide=True,
        ),
        table=_table(drawn_paths, leaders),
        wide=True,
    )


def _leaders(paths: Sequence[EvidencePath]) -> list[str]:
    highest: dict[str, float] = {}
    for path in paths:
        for family, values in path.families.items():
            highest[family] = max(highest.get(family, -math.inf), *values)
    return sorted(highest, key=lambda family: -highest[family])[:N_FAMILIES]


def _finding(paths: Sequence[EvidencePath], leaders: list[str]) -> str:
    parts = []
    for path in paths:
        reached = next((k for k, value in enumerate(path.mean) if value >= path.threshold_first), None)
        epoch = f"In epoch {path.epoch} the" if len(paths) > 1 else "The"
        top = max(path.mean)
        if reached is None:
            parts.append(
                f"{epoch} mean evidence never reached its threshold of "
                f"{figures(path.threshold_first / LN_10, 2)}; "
                f"its highest value was {figures(top / LN_10, 2)}."
            )
        else:
            begin = path.first + reached * path.width
            parts.append(
                f"{epoch} mean evidence reached its threshold of "
                f"{figures(path.threshold_first / LN_10, 2)} between places "
                f"{begin} and {begin + path.width - 1}, and rose to {figures(top / LN_10, 3)}."
            )
    if leaders:
        parts.append(f"Highest family: {visible(leaders[0])}.")
    return " ".join(parts)


def _draw(axes: Axes, paths: Sequence[EvidencePath], leaders: list[str], marks: Sequence[Mark]) -> None:
    for number, path in enumerate(paths):
        ends = path.ends()
        for k, family in enumerate(leaders):
            values = path.families.get(family)
            if values:
                axes.plot(
                    ends,
                    [value / LN_10 for value in values],
                    color=ACCENTS[k % len(ACCENTS)],
                    linestyle=DASHES[k % len(DASHES)],
                    label=short(family, 26) if number == 0 else None,
                )
        axes.plot(
            ends,
            [value / LN_10 for value in path.mean],
            color=INK,
            lw=2.0,
            label="mean of all" if number == 0 else None,
        )
        for threshold in (path.threshold_first, path.threshold_own):
            axes.plot(
                [path.first, ends[-1]], [threshold / LN_10] * 2, color=ORANGE, lw=1.2, linestyle=(0, (4, 3))
            )
        if number:
            axes.axvline(path.first, color=INK, lw=0.8, linestyle=(0, (1, 2)))
    for mark in marks:
        if mark.raised is not None:
            axes.annotate(
                short(mark.label, 6), (mark.raised, 0.97),
                xycoords=("data", "axes fraction"), ha="center", va="top",
                fontsize=9.5, fontweight="bold",
            )  # fmt: skip
    lowest = min(0.0, *(min(path.mean) / LN_10 for path in paths))
    axes.set_ylim(bottom=max(lowest, -3.0) - 0.3)
    axes.set_xlabel("place in the order")
    axes.set_ylabel("log10 of the e-value")
    legend_above(axes, n_columns=5)


def _table(paths: Sequence[EvidencePath], leaders: list[str]) -> DataTable:
    rows = []
    for path in paths:
        ends = path.ends()
        step = max(math.ceil(len(ends) / N_ROWS), 1)
        for k in range(0, len(ends), step):
            part = slice(k, k + step)
            rows.append(
                (
                    str(path.epoch),
                    str(path.first + k * path.width),
                    str(ends[part][-1]),
                    figures(max(path.mean[part]) / LN_10),
                    *(
                        figures(max(path.families[family][part]) / LN_10) if family in path.families else "–"
                        for family in leaders
                    ),
                )
            )
    return DataTable(
        headers=("epoch", "from place", "to place", "mean of all", *(visible(family) for family in leaders)),
        rows=tuple(rows),
        note="Highest log10 e-value of each stretch.",
    )
