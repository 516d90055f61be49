"""A response in one line of plain characters: where it lay above and below its cells' own levels."""

from __future__ import annotations

import math
from collections.abc import Sequence

NAME_WIDTH = 16
"""Columns of a name beside a strip of 60: together they fit into 80."""
SIGNS = "_-o+^"
"""From far below to far above; ASCII, so that every terminal shows them, without colour."""
STEPS_SD = (-1.5, -0.5, 0.5, 1.5)
"""Where one sign gives way to the next, in standard deviations of the strip's own means."""


def strip_line(means: Sequence[float]) -> str:
    """Return a sign for each stretch's mean, by how far it lies from zero among all of them."""
    scale = math.sqrt(sum(mean * mean for mean in means) / len(means)) if means else 0.0
    if scale == 0.0:
        return SIGNS[2] * len(means)
    return "".join(SIGNS[sum(mean / scale > step for step in STEPS_SD)] for mean in means)


def shortened(name: str, width: int) -> str:
    """Return a name of at most so many characters."""
    return name if len(name) <= width else f"{name[: width - 1]}~"
