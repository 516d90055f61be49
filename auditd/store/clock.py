"""Instants as the store keeps them: integer microseconds since 1970-01-01T00:00Z."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MICROSECOND = timedelta(microseconds=1)


def to_us(at: datetime) -> int:
    """Return an aware time in microseconds; exact, also before 1970."""
    return (at - _EPOCH) // _MICROSECOND


def from_us(at_us: int) -> datetime:
    """Return microseconds as an aware time in UTC."""
    return _EPOCH + timedelta(microseconds=at_us)


def now_us() -> int:
    """Return the clock's time in microseconds."""
    return to_us(datetime.now(UTC))


def rfc3339(at: datetime | None) -> str | None:
    """Return a time as RFC 3339 text in UTC, without a fraction where there is none."""
    if at is None:
        return None
    text = at.astimezone(UTC).isoformat()
    return text.replace("+00:00", "Z")
