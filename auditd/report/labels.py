"""Text and numbers as the page shows them; nothing that a run is called acts on a reader's screen."""

from __future__ import annotations

import math
import unicodedata

N_LABEL = 28
"""Longest name drawn in a picture; tables hold it in full."""


def visible(text: object) -> str:
    """Return text with control and format characters as escapes, so that none reorders or hides anything."""
    return "".join(
        character
        if character == " " or unicodedata.category(character)[0] != "C"
        else character.encode("unicode_escape", "surrogatepass").decode("ascii")
        for character in str(text)
    )


def short(text: object, n: int = N_LABEL) -> str:
    """Return visible text of at most n characters."""
    shown = visible(text)
    return shown if len(shown) <= n else shown[: n - 1] + "…"


def figures(value: float | None, digits: int = 3) -> str:
    """Return a number with so many significant digits; a dash where there is none."""
    if value is None or not math.isfinite(value):
        return "–"
    if isinstance(value, int):
        return f"{value:,}"
    size = abs(value)
    if digits <= 3 and 1000 <= size < 1e6:
        return f"{value:,.0f}"
    return f"{value:.{digits}g}".replace("-", "−")


def share(value: float | None) -> str:
    """Return a share in per cent."""
    return "–" if value is None or not math.isfinite(value) else f"{100 * value:.0f} %"


def span(low: float | None, high: float | None, digits: int = 3) -> str:
    """Return an interval in words; a dash where it has no ends."""
    if low is None or high is None:
        return "–"
    return f"{figures(low, digits)} to {figures(high, digits)}"


def listed(names: list[str], *, n_most: int = 8) -> str:
    """Return names as a list in words, cut where there are many."""
    shown = [visible(name) for name in names[:n_most]]
    if len(names) > n_most:
        return f"{', '.join(shown)} and {len(names) - n_most:,} more"
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}" if shown else "none"
