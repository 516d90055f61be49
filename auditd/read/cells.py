"""The text of a table's cell, or of a pattern's group, as a JSON value."""

from __future__ import annotations

import re

_INTEGER = re.compile(r"-?(?:0|[1-9][0-9]*)")
_NUMBER = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?")
_MAX_DIGITS = 4_000
"""Python converts at most 4,300 digits by default; a longer one stays a text."""
_LOOSE = re.compile(
    r"[+-]?(?:(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?|nan|inf|infinity)", re.IGNORECASE
)


def cell_value(text: str) -> str | int | float:
    """Return the number where a text is a JSON number (RFC 8259, section 6) that a double holds, else it."""
    if len(text) > _MAX_DIGITS or not _NUMBER.fullmatch(text):
        return text
    if _INTEGER.fullmatch(text):
        return int(text)
    value = float(text)
    return text if value in {float("inf"), float("-inf")} else value


def cell_number(text: str) -> float | None:
    """Return the number that a measured cell states: also `1.`, `.5`, `+1`, NaN and infinities; else None."""
    text = text.strip()
    if len(text) > _MAX_DIGITS or not _LOOSE.fullmatch(text):
        return None
    value = float(text)
    return None if value in {float("inf"), float("-inf")} and "n" not in text.lower() else value
