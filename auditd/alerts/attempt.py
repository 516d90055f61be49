"""What became of one try to deliver a message."""

from __future__ import annotations

from typing import Literal

import msgspec


class Attempt(msgspec.Struct, frozen=True, kw_only=True):
    """A try: `delivered`, `failed` with its error in one line, or `stopped` early and not counted."""

    outcome: Literal["delivered", "failed", "stopped"]
    error: str = ""


def failed(error: str) -> Attempt:
    """Return a failure."""
    return Attempt(outcome="failed", error=error)


DELIVERED = Attempt(outcome="delivered")
STOPPED = Attempt(outcome="stopped")
