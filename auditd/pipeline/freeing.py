"""Giving memory back to the system after work that needed much of it for a moment."""

from __future__ import annotations

import ctypes
import gc
import sys
from functools import cache
from typing import Any


def give_back_memory() -> None:
    """Free what is no longer used, and let the C library return it: it would keep it for the next time.

    With another C library than glibc only the first half is done.
    """
    gc.collect()
    trim = _trim()
    if trim is not None:
        trim(0)


@cache
def _trim() -> Any | None:  # a foreign function, which ctypes cannot type
    """Return glibc's `malloc_trim` (malloc_trim(3)), or None where there is none."""
    if not sys.platform.startswith("linux"):
        return None
    return getattr(ctypes.CDLL(None), "malloc_trim", None)
