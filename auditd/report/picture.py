"""A picture of the page: the drawing, what it shows in words, and the numbers behind it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class DataTable:
    """Rows under headers; every cell is text as it is shown."""

    headers: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    note: str = ""


@dataclass(frozen=True, kw_only=True)
class Picture:
    """One drawing.

    `svg` is a drawing without script, style and outside reference, whose text alternative states `finding`.
    `caption` says how to read it and by what method it was made. A picture that cannot be drawn has no
    `svg`, and its finding says why.
    """

    name: str
    title: str
    finding: str
    caption: str = ""
    svg: str = ""
    table: DataTable | None = None
    wide: bool = False


def undrawn(name: str, title: str, reason: str) -> Picture:
    """Return the place of a picture that cannot be drawn, with the reason."""
    return Picture(name=name, title=title, finding=f"Not drawn: {reason}.")
