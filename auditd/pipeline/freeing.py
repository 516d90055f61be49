"""Giving memory back to the system after work that needed much of it for a moment."""

from __future__ import annotations

import ctypes
import gc
import sys
from functools import cache
from typing import Any

M_ARENA_MAX = -8
"""Number of the option in glibc's malloc.h (mallopt(3))."""
N_ARENAS = 2
"""Heaps that threads share: with one for each thread, what one gives back no other can use."""


def share_arenas() -> None:
    """Let the threads of a process that runs for weeks share few heaps; call it before they begin."""
    limit = _of_libc("mallopt")
    if limit is not None:
        limit(M_ARENA_MAX, N_ARENAS)


def give_back_memory(*, collect: bool = True) -> None:
    """Free what is no longer used, and let the C library return it: it would keep it for the next time.

    With another C library than glibc only the first half is done.
    """
    if collect:
        gc.collect()
    trim = _of_libc("malloc_trim")
    if trim is not None:
        trim(0)


@cache
def _of_libc(name: str) -> Any | None:  # a foreign function, which ctypes cannot type
    """Return a function of glibc, or None where there is none of the name."""
    if not sys.platform.startswith("linux"):
        return None
    return getattr(ctypes.CDLL(None), name, None)
