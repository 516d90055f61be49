"""When a failed delivery is tried again, and when it is given up."""

from __future__ import annotations

import hashlib

N_TRIES = 12
"""A letter that failed so often is dead; with the waits below that is after about two days."""
FIRST_WAIT_S = 80.0
"""Wait after the first failure; each further one doubles it: 80 s × (2¹¹ - 1) is 45 h."""
JITTER = 0.2
"""A wait is longer or shorter by up to so much, so that letters and machines do not come in step."""


def is_last(n_tries: int) -> bool:
    """Whether the try that just failed, `n_tries` having failed before it, was the last."""
    return n_tries + 1 >= N_TRIES


def wait_s(alert_id: str, n_tries: int) -> float:
    """Return the wait after a failure, `n_tries` having failed before it; the same for the same letter."""
    digest = hashlib.blake2b(f"{alert_id}:{n_tries}".encode(), digest_size=8).digest()
    share = int.from_bytes(digest) / 2**64
    return FIRST_WAIT_S * (1 << n_tries) * (1 + JITTER * (2 * share - 1))
