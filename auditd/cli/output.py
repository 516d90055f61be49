"""What commands print: JSON documents, tables and messages; no terminal escape of a run ever gets out."""

from __future__ import annotations

import sys
import unicodedata
from collections.abc import Iterable, Sequence
from typing import Any

import click
import msgspec


def safe(text: object) -> str:
    """Return text for a terminal: control and format characters are shown as escapes."""
    return "".join(
        character if unicodedata.category(character)[0] != "C" or character == " " else _escape(character)
        for character in str(text)
    )


def _escape(character: str) -> str:
    return character.encode("unicode_escape", "surrogatepass").decode("ascii")


def print_json(document: Any) -> None:  # a JSON document
    """Print one JSON document."""
    click.echo(msgspec.json.format(msgspec.json.encode(document), indent=2).decode())


def print_table(
    headers: Sequence[str], rows: Iterable[Sequence[object]], *, right: Iterable[int] = ()
) -> None:
    """Print rows under headers, columns aligned; numbers to the right."""
    cells = [[safe("" if value is None else value) for value in row] for row in rows]
    widths = [max([len(head), *(len(row[k]) for row in cells)]) for k, head in enumerate(headers)]
    to_right = set(right)
    for line in [list(headers), *cells]:
        parts = [
            text.rjust(widths[k]) if k in to_right else text.ljust(widths[k]) for k, text in enumerate(line)
        ]
        click.echo("  ".join(parts).rstrip())


def message(text: str) -> None:
    """Print a message for the operator on stderr."""
    click.echo(safe_lines(text), err=True)


def safe_lines(text: str) -> str:
    """Return text of several lines for a terminal."""
    return "\n".join(safe(line) for line in text.split("\n"))


def number(value: float | None, digits: int = 3) -> str:
    """Return a number with so many significant digits; a dash where there is none."""
    if value is None:
        return "-"
    return f"{value:.{digits}g}" if isinstance(value, float) else str(value)


def percent(value: float | None) -> str:
    """Return a share in per cent; one that rounds to zero has no sign."""
    return "-" if value is None else f"{round(100 * value) + 0:d} %"


def worth(value: float | None) -> str:
    """Return an effective number of runs: whole from 100 on, else three significant digits."""
    return "-" if value is None else f"{value:.0f}" if value >= 100 else f"{value:.3g}"


def is_terminal() -> bool:
    """Whether messages go to a terminal."""
    return sys.stderr.isatty()
