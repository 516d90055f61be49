"""Making foreign text fit for a log line, a mail's subject or a terminal."""

from __future__ import annotations

N_CHARACTERS = 200
"""Of a program's first line so much is shown."""


def one_line(text: str, limit: int = N_CHARACTERS) -> str:
    """Return text on one line: what is not printable becomes a space, what is too long is cut."""
    kept = "".join(sign if sign.isprintable() else " " for sign in text)
    kept = " ".join(kept.split())
    return kept if len(kept) <= limit else f"{kept[: limit - 1]}…"


def first_line(output: bytes) -> str:
    """Return the first line of a program's output that says anything, fit to be shown."""
    for line in output.decode(errors="replace").splitlines():
        shown = one_line(line)
        if shown:
            return shown
    return ""
