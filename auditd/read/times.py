"""Times of a record: RFC 3339 and ISO 8601 texts, or POSIX seconds, to aware UTC."""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

from auditd.errors import BadInput

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_LEAP = re.compile(r"^(.*[T ]\d\d:\d\d):60(\.\d+)?(.*)$", re.IGNORECASE)
_MS_FROM = 1e11
"""Larger numbers are milliseconds: as seconds they would lie beyond the year 5138."""
_US_FROM = 1e14
_NS_FROM = 1e17


def parse_time(value: Any, zone: ZoneInfo | None) -> datetime:
    """Return a time as aware UTC.

    A text without an offset is taken in `zone`; where the zone's clock shows an hour twice, the first of
    the two is meant (`fold=0`). A number is POSIX seconds, from 1e11 on milliseconds, from 1e14
    microseconds, from 1e17 nanoseconds. A leap second is the second after it.

    Raises
    ------
    BadInput
        Neither text nor number, not a time, or without offset where no zone is stated.
    """
    try:
        if isinstance(value, str):
            return _from_text(value, zone)
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            return _from_number(value)
    except (ValueError, OverflowError) as error:
        if isinstance(error, BadInput):
            raise
        raise BadInput(f"{value!r:.60} is not a time ({error})") from None
    raise BadInput(f"{value!r:.60} is not a time; write RFC 3339 such as 2026-03-01T12:00:00Z")


def _from_text(text: str, zone: ZoneInfo | None) -> datetime:
    leap = _LEAP.match(text)
    if leap is not None:
        return _from_text(f"{leap[1]}:59{leap[2] or ''}{leap[3]}", zone) + timedelta(seconds=1)
    time = datetime.fromisoformat(text[:-1] + "Z" if text[-1:] == "z" else text)
    if time.tzinfo is None:
        if zone is None:
            raise BadInput(f"{text!r:.60} has no offset, and the plan has no record.zone")
        time = time.replace(tzinfo=zone)
    return time.astimezone(UTC)


def _from_number(number: float) -> datetime:
    size = abs(number)
    if size < _MS_FROM:
        return _EPOCH + timedelta(seconds=number)
    if size < _US_FROM:
        return _EPOCH + timedelta(milliseconds=number)
    return _EPOCH + timedelta(microseconds=number if size < _NS_FROM else number / 1000)
