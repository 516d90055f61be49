"""Drawing by matplotlib: one place for size, type and repeatability."""

from __future__ import annotations

import contextlib
import io
import logging
import warnings
from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

from auditd.report.palette import GRID, INK, MUTED, PAPER
from auditd.report.svg_cleaning import clean_svg

if TYPE_CHECKING:
    from matplotlib.axes import Axes

POINTS_AN_INCH = 72.0
WIDE_PT = (760.0, 230.0)
"""Width and height of a drawing over the whole column."""
NARROW_PT = (400.0, 270.0)
"""Width and height of a drawing that shares the column with another."""
_SETTINGS: dict[str, Any] = {  # values of several types
    "svg.fonttype": "none",
    "svg.hashsalt": "auditd",
    "text.parse_math": False,
    "axes.unicode_minus": True,
    "font.size": 10.0,
    "axes.edgecolor": MUTED,
    "axes.labelcolor": INK,
    "axes.facecolor": "none",
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.formatter.use_mathtext": False,
    "figure.facecolor": "none",
    "savefig.facecolor": "none",
    "text.color": INK,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "grid.color": GRID,
    "grid.linewidth": 0.8,
    "legend.frameon": False,
    "legend.fontsize": 9.0,
    "lines.linewidth": 1.4,
    "path.simplify": False,
    "patch.edgecolor": PAPER,
}


def drawn(
    draw: Callable[[Axes], None],
    *,
    name: str,
    title: str,
    finding: str,
    wide: bool = False,
    size_pt: tuple[float, float] | None = None,
    left_pt: float = 62.0,
) -> str:
    """Return a drawing as SVG for the page.

    Parameters
    ----------
    draw : draws on the axes that it is given.
    name : unique within the page; letters, digits and hyphens.
    title, finding : the text alternative.
    left_pt : room for the labels of the vertical axis.
    """
    import matplotlib as mpl
    from matplotlib.figure import Figure

    width, height = size_pt or (WIDE_PT if wide else NARROW_PT)
    stream = io.StringIO()
    with mpl.rc_context(_SETTINGS), _quiet():  # type: ignore[arg-type] # keys are the library's own
        figure = Figure(figsize=(width / POINTS_AN_INCH, height / POINTS_AN_INCH))
        axes = figure.add_axes(
            (left_pt / width, 44 / height, 1 - (left_pt + 12) / width, 1 - (44 + 26) / height)
        )
        axes.grid(visible=True, axis="y")
        axes.set_axisbelow(True)
        draw(axes)
        figure.savefig(stream, format="svg", metadata={"Date": None})
    return clean_svg(stream.getvalue(), name=name, title=title, finding=finding)


def legend_above(axes: Axes, n_columns: int = 8) -> None:
    """Put the legend above the drawing, where it hides no point."""
    axes.legend(
        loc="lower left",
        bbox_to_anchor=(-0.01, 1.0),
        ncols=n_columns,
        borderaxespad=0.2,
        handletextpad=0.3,
        columnspacing=1.0,
        handlelength=1.6,
    )


@contextlib.contextmanager
def _quiet() -> Iterator[None]:
    """Silence remarks on fonts: the page's own font draws the text, not the library's."""
    log = logging.getLogger("matplotlib")
    level = log.level
    log.setLevel(logging.ERROR)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        try:
            yield
        finally:
            log.setLevel(level)
