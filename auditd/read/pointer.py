"""RFC 6901 pointers, and keys of the plan, compiled to accessors."""

from __future__ import annotations

import operator
import re
from collections.abc import Callable
from typing import Any

from auditd.errors import BadInput

MISSING: Any = object()
"""What an accessor returns where nothing stands."""
_INDEX = re.compile(r"0|[1-9][0-9]{0,17}")


def parse_pointer(pointer: str) -> tuple[str, ...]:
    """Return a pointer's reference tokens, unescaped.

    Raises
    ------
    BadInput
        It neither is empty nor begins with `/`, or has a `~` that is not `~0` or `~1`.

    References
    ----------
    RFC 6901, sections 3 and 4.
    """
    if not pointer:
        return ()
    if not pointer.startswith("/") or re.search(r"~(?![01])", pointer):
        raise BadInput(f"{pointer!r} is not a JSON pointer (RFC 6901)")
    return tuple(token.replace("~1", "/").replace("~0", "~") for token in pointer[1:].split("/"))


def resolve(document: Any, tokens: tuple[str, ...]) -> Any:
    """Return the value that tokens lead to, or MISSING."""
    for token in tokens:
        if isinstance(document, dict):
            document = document.get(token, MISSING)
        elif isinstance(document, list) and _INDEX.fullmatch(token) and int(token) < len(document):
            document = document[int(token)]
        else:
            return MISSING
    return document


def tokens_of(key: str) -> tuple[str, ...]:
    """Return the tokens of a plan's key: a pointer when it begins with `/`, else one name."""
    return parse_pointer(key) if key.startswith("/") else (key,)


def accessor(tokens: tuple[str, ...]) -> Callable[[dict[str, Any]], Any]:
    """Compile tokens to a function of a record that returns the value or MISSING."""
    if len(tokens) == 1:
        return operator.methodcaller("get", tokens[0], MISSING)
    if len(tokens) == 2:
        outer, inner = tokens

        def get_two(record: dict[str, Any]) -> Any:
            middle = record.get(outer)
            return middle.get(inner, MISSING) if type(middle) is dict else resolve(middle, (inner,))

        return get_two
    return lambda record: resolve(record, tokens)
