"""Several files' records in one transaction: a commit waits for the disk, a file need not."""

from __future__ import annotations

import time
from collections.abc import Iterable, Iterator

from auditd.records import Batch

N_RECORDS_A_COMMIT = 5_000
"""Records from which a group is committed …"""
GROUP_MAX_S = 0.25
"""… or when its first batch has waited for so long, so that a warning is not kept back."""


def grouped(batches: Iterable[Batch]) -> Iterator[list[Batch]]:
    """Yield the batches of a visit in groups, in their order, each to be taken in one transaction.

    If that fails, what the landing remembers is ahead of the store, and has to be made anew from it.
    """
    group: list[Batch] = []
    n_records, began_s = 0, 0.0
    for batch in batches:
        if not group:
            n_records, began_s = 0, time.monotonic()
        group.append(batch)
        n_records += len(batch.items)
        if n_records >= N_RECORDS_A_COMMIT or time.monotonic() - began_s > GROUP_MAX_S:
            yield group
            group = []
    if group:
        yield group
