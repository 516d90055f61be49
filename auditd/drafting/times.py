"""Which columns are times, and which of them is the start and which the end."""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import msgspec

from auditd.drafting import hints
from auditd.drafting.column import Column, Landed
from auditd.errors import BadInput
from auditd.read.times import parse_time

SHARE_TIMES = 0.99
"""At least so many of the stated values must read as times."""
FIRST = datetime(1990, 1, 1, tzinfo=UTC).timestamp()
LAST = datetime(2100, 1, 1, tzinfo=UTC).timestamp()
"""A number outside is no date of a run."""
SHARE_ORDERED = 0.99
_UTC = ZoneInfo("UTC")


class Timed(msgspec.Struct, kw_only=True):
    """A column of times, as POSIX seconds, None where nothing is stated."""

    column: Column
    seconds: list[float | None]
    naive: bool


class Span(msgspec.Struct, kw_only=True):
    """The start and the end of runs, as far as they are stated, and why they are taken for that."""

    started: Timed | None = None
    finished: Timed | None = None
    others: list[Timed] = []
    why: str = ""


def times_of(landed: Landed) -> list[Timed]:
    """Return the columns whose values are times."""
    return [found for column in landed.columns if (found := _timed(column)) is not None]


def _timed(column: Column) -> Timed | None:
    stated = column.stated
    texts = [value for value in stated if isinstance(value, str)]
    if len(texts) == len(stated):
        if not all(len(text) >= 8 and not text.isdigit() for text in texts[:20]):
            return None
    elif texts or not (column.words & hints.TIME):
        return None
    seconds = [_seconds(value) for value in column.values]
    good = sum(at is not None and FIRST <= at <= LAST for at in seconds)
    if good < SHARE_TIMES * len(stated) or not good:
        return None
    return Timed(column=column, seconds=seconds, naive=any(_is_naive(text) for text in texts[:100]))


def _seconds(value: object) -> float | None:
    if value is None or isinstance(value, bool):
        return None
    try:
        return parse_time(value, _UTC).timestamp()
    except (BadInput, OverflowError, ValueError, OSError):
        return None


def _is_naive(text: str) -> bool:
    try:
        parse_time(text, None)
    except BadInput:
        return True
    return False


def span_of(found: list[Timed]) -> Span:
    """Tell start and end apart: by which is never later, and by name where there are more than two."""
    if not found:
        return Span()
    if len(found) == 1:
        only = found[0]
        if only.column.words & hints.FINISH and not only.column.words & hints.START:
            return Span(finished=only, why="the only time; its name says end")
        return Span(started=only, why="the only time")
    pairs = [
        (_score(first, second), -i, -j, first, second)
        for i, first in enumerate(found)
        for j, second in enumerate(found)
        if i != j and _never_later(first, second)
    ]
    if not pairs:
        return Span(
            started=found[0],
            others=found[1:],
            why="the first of several times, none of which is always before another",
        )
    _, _, _, first, second = max(pairs, key=lambda pair: pair[:3])
    return Span(
        started=first,
        finished=second,
        others=[one for one in found if one is not first and one is not second],
        why=f"{first.column.key} is never later than {second.column.key}",
    )


def _score(first: Timed, second: Timed) -> int:
    return 2 * bool(first.column.words & hints.START) + 2 * bool(second.column.words & hints.FINISH)


def _never_later(first: Timed, second: Timed) -> bool:
    both = [
        (a, b) for a, b in zip(first.seconds, second.seconds, strict=True) if a is not None and b is not None
    ]
    earlier = sum(a <= b for a, b in both)
    return bool(both) and earlier >= SHARE_ORDERED * len(both) and any(a < b for a, b in both)
