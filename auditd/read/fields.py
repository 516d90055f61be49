"""A record's values as the types that a run has; each function says what is wrong in words."""

from __future__ import annotations

import hashlib
import json
import math
from typing import Any

import msgspec

from auditd.errors import BadInput
from auditd.read.cells import cell_number
from auditd.read.pointer import MISSING
from auditd.records import Level, normal_level

MAX_TEXT = 4096
"""Characters of an id, seed, status or level; a longer one is no name but data in the wrong place."""
_INT64 = 2**63
_encode = msgspec.json.Encoder(order="deterministic").encode


class Unfit(BadInput):
    """A value does not fit the field that the plan gives it."""


def as_text(value: Any, name: str) -> str | None:
    """Return an id, seed, parent or status as text, integers with all their digits; null is not stated."""
    if value is None:
        return None
    text = value if isinstance(value, str) else _text_of_number(value)
    if len(text) > MAX_TEXT:
        raise Unfit(f"{name} has {len(text)} characters; at most {MAX_TEXT} are taken")
    return text


def _text_of_number(value: Any) -> str:
    normal = normal_level(value)
    return normal if isinstance(normal, str) else json.dumps(normal)


def as_level(value: Any, name: str) -> Level:
    """Return a factor's or nuisance's level."""
    if isinstance(value, float) and not math.isfinite(value):
        raise Unfit(f"{name} is {value}, which cannot be told from itself; a level is a finite value")
    level = normal_level(value)
    if isinstance(level, str) and len(level) > MAX_TEXT:
        raise Unfit(f"{name} has {len(level)} characters; a level has at most {MAX_TEXT}")
    return level


def as_number(value: Any, name: str, *, written: bool) -> float:
    """Return a response, NaN and infinities kept; texts are numbers only in formats without types."""
    if isinstance(value, str) and written:
        number = cell_number(value)
        if number is not None:
            return number
    elif isinstance(value, (int, float)) and not isinstance(value, bool):
        try:
            return float(value)
        except OverflowError:
            raise Unfit(f"response {name} is beyond the range of a double") from None
    if value is MISSING or value is None:
        raise Unfit(f"response {name} is missing")
    raise Unfit(f"response {name} is not a number: {_shown(value)}")


def as_sequence(value: Any) -> int | None:
    """Return a sequence number; null is not stated."""
    if value is None:
        return None
    if isinstance(value, float) and value.is_integer():
        value = int(value)
    if not isinstance(value, int) or isinstance(value, bool) or not -_INT64 <= value < _INT64:
        raise Unfit(f"sequence is not an integer of 64 bits: {_shown(value)}")
    return value


def _shown(value: Any) -> str:
    """Return the beginning of a value's JSON text, for a message."""
    return json.dumps(value, default=str)[:60]


def digest_of(record: dict[str, Any]) -> bytes:
    """Return 16 bytes that identify a record's content, whatever the order of its names.

    Raises
    ------
    Unfit
        A text holds NUL, which not every store keeps.
    """
    canonical = _encode(record)
    if b"null" in canonical:  # NaN and infinities are written as null; json tells them apart
        canonical = json.dumps(record, sort_keys=True).encode()
    if b"\\u0000" in canonical and _holds_nul(record):
        raise Unfit("a text holds the character NUL")
    return hashlib.blake2b(canonical, digest_size=16).digest()


def _holds_nul(value: Any) -> bool:
    if isinstance(value, str):
        return "\0" in value
    if isinstance(value, dict):
        return any("\0" in name or _holds_nul(inner) for name, inner in value.items())
    return isinstance(value, list) and any(_holds_nul(inner) for inner in value)
