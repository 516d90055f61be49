"""The readers there are, and which of them reads a file."""

from __future__ import annotations

import os
from collections.abc import Iterator

from auditd.plan import Plan
from auditd.read.raw import Extent, Raw, Reader
from auditd.records import Refusal


def reader_for(path: str, plan: Plan) -> Reader | None:
    """Return the reader of a file: by `landing.format`, else by the suffix; None where neither says."""
    raise NotImplementedError


def read_file(path: str | os.PathLike[str], plan: Plan) -> Iterator[Raw | Refusal]:
    """Yield everything that stands in one file that nobody writes to any more.

    What is not readable comes as a Refusal: of a record, or of the whole file (kind `file`).

    Raises
    ------
    OSError
        The file cannot be opened or read.
    """
    raise NotImplementedError
