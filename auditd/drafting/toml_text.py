"""Text for a TOML file: strings, names and comments that nothing in the data can break out of."""

from __future__ import annotations

import re
import unicodedata

import msgspec

WIDTH = 100
_UNFIT = re.compile(r"[^A-Za-z0-9_-]+")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
RESERVED = frozenset({"order", "machine", "duration", "completed", "from", "to"})
"""Names that the tool gives itself."""


def quoted(text: str) -> str:
    """Return a TOML basic string."""
    return msgspec.json.encode(text).decode().replace("\x7f", "\\u007F")


def level(text: str, *, is_text: bool) -> str:
    """Return a factor's level as TOML."""
    return quoted(text) if is_text else text


def bare(name: str) -> str:
    """Return a key of a table, quoted where it must be."""
    return name if _BARE.fullmatch(name) else quoted(name)


def comment(text: str) -> str:
    """Return one comment; control characters become escapes, so that no line can end early."""
    shown = "".join(
        character
        if unicodedata.category(character)[0] != "C"
        else character.encode("unicode_escape", "surrogatepass").decode()
        for character in text
    )
    return f"# {shown}"


def names_for(paths: list[tuple[str, ...]]) -> dict[tuple[str, ...], str]:
    """Return a plan's name for each key: its last part, or more of it where that is taken."""
    found: dict[tuple[str, ...], str] = {}
    used: set[str] = set(RESERVED)
    for path in paths:
        candidates = [_name("_".join(path[-k:])) for k in range(1, len(path) + 1)]
        candidates += [f"{candidates[-1][:58]}_{number}" for number in range(2, len(paths) + 3)]
        name = next(candidate for candidate in candidates if candidate not in used)
        used.add(name)
        found[path] = name
    return found


def _name(text: str) -> str:
    cleaned = _UNFIT.sub("_", text).strip("_-")[:64] or "column"
    return cleaned if cleaned[0].isalpha() else f"c_{cleaned}"[:64]
