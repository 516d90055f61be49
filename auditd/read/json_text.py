"""JSON bytes to values: fast where they are strict, tolerant of the bare NaN and Infinity tokens.

Of a name that stands twice in one object the last value counts, as in Python's own json.
"""

from __future__ import annotations

import json
import re
from typing import Any, NoReturn

import msgspec

from auditd.errors import BadInput
from auditd.read.raw import MAX_DEPTH

BOM = b"\xef\xbb\xbf"
_WORDS = ("NaN", "Infinity", "-Infinity", "true", "false", "null")
_LAST_WORD = re.compile(rb"[-+.\w]+$")
_CUT_NUMBER = re.compile(r"-?\d*\.?\d*(?:[eE][+-]?\d*)?")
_BARE = re.compile(rb"\b(NaN|Infinity)\b")
_SURROGATE = re.compile(rb"\\u[dD][89a-fA-F]")
_AT_BYTE = re.compile(r"\(byte (\d+)\)")
_TOO_DEEP = f"nested deeper than {MAX_DEPTH}"
_decode = msgspec.json.Decoder().decode


class NotJson(BadInput):
    """The bytes are not JSON. `half`: they may become JSON when more is written."""

    def __init__(self, reason: str, *, half: bool = False) -> None:
        self.half = half
        super().__init__(reason)


def decode_json(data: bytes) -> Any:
    """Return the value of a JSON text, which may hold bare NaN, Infinity and -Infinity.

    Raises
    ------
    NotJson
        Malformed, half, deeper than MAX_DEPTH, not UTF-8, or with a number beyond a double.
    """
    try:
        value = _decode(data)
    except msgspec.DecodeError as error:
        value = _decode_tolerant(data, error)
    except RecursionError:
        raise NotJson(_TOO_DEEP) from None
    if data.count(b"{") + data.count(b"[") > MAX_DEPTH and depth_exceeds(value, MAX_DEPTH):
        raise NotJson(_TOO_DEEP)
    return value


def depth_exceeds(value: Any, limit: int) -> bool:
    """Whether lists and objects are nested deeper than `limit`."""
    level = [value] if isinstance(value, (dict, list)) else []
    depth = 0
    while level and depth <= limit:
        depth += 1
        inner = (item for outer in level for item in (outer.values() if isinstance(outer, dict) else outer))
        level = [item for item in inner if isinstance(item, (dict, list))]
    return depth > limit


def _decode_tolerant(data: bytes, error: msgspec.DecodeError) -> Any:
    """Read what the strict decoder refuses only for its bare tokens or its byte order mark."""
    if data.startswith(BOM):
        return decode_json(data[len(BOM) :])
    if not (_BARE.search(data) or _SURROGATE.search(data)):
        _refuse(data, str(error))
    try:
        value = json.loads(data.decode(), parse_float=_finite)
    except UnicodeDecodeError:
        _refuse(data, str(error))
    except json.JSONDecodeError as tolerant:
        text = data.decode()
        half = tolerant.pos >= len(text.rstrip()) or tolerant.msg.startswith("Unterminated")
        half = half or _is_cut_token(text[tolerant.pos :])
        raise NotJson(f"not JSON: {tolerant}", half=half) from None
    except RecursionError:
        raise NotJson(_TOO_DEEP) from None
    except ValueError as tolerant:
        raise NotJson(f"not JSON: {tolerant}") from None
    if _SURROGATE.search(data):
        _refuse_lone_surrogates(value)
    return value


def _finite(text: str) -> float:
    """Return a number's value; one beyond a double would silently become infinite."""
    value = float(text)
    if value in {float("inf"), float("-inf")}:
        raise ValueError("number out of range")
    return value


def _refuse_lone_surrogates(value: Any) -> None:
    try:
        json.dumps(value, ensure_ascii=False).encode()
    except UnicodeEncodeError:
        raise NotJson("not JSON: half of a surrogate pair stands alone") from None


def _refuse(data: bytes, message: str) -> NoReturn:
    """Raise with a reason, telling what is half from what can never become JSON."""
    half = "truncated" in message or _is_cut(data, _AT_BYTE.search(message))
    try:
        data.decode()
    except UnicodeDecodeError as error:
        # a character cut in two at the very end may still be completed
        half = half and error.reason == "unexpected end of data"
        raise NotJson(f"not UTF-8 at byte {error.start}", half=half) from None
    raise NotJson("JSON ends too early" if half else f"not JSON: {message}", half=half)


def _is_cut(data: bytes, at: re.Match[str] | None) -> bool:
    """Whether the place that the decoder complains of is where the text breaks off within a word."""
    if at is None:
        return False
    word = _LAST_WORD.search(data)
    start = len(data) if word is None else word.start()
    if int(at[1]) < start:
        return False
    text = data[start:].decode(errors="replace")
    at_end = int(at[1]) >= len(data)
    return (at_end and _CUT_NUMBER.fullmatch(text) is not None) or _is_cut_token(text)


def _is_cut_token(text: str) -> bool:
    """Whether a text is the beginning of a word that JSON, or a bare token, may have."""
    return any(word.startswith(text) and word != text for word in _WORDS)
