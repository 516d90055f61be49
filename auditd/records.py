"""The records that pass between layers: frozen, keyword-only, times aware and in UTC."""

from __future__ import annotations

from datetime import datetime
from typing import Any, Literal

import msgspec

Level = str | int | float | bool | None
"""A factor's or nuisance's level as a JSON value; 1.0 is kept as 1, a list or object as its JSON text."""

NOT_STATED = "(not stated)"
"""The level of a nuisance that a record does not state."""

Kind = Literal[
    "serial", "drift", "batch", "spread", "clock", "lineage",
    "repeat", "seed", "confound", "order", "time", "gap", "rewrite", "failure", "cap", "silence", "plan",
]  # fmt: skip
Grade = Literal["note", "material", "severe"]
State = Literal["standing", "answered", "withdrawn"]
GRADES: tuple[Grade, ...] = ("note", "material", "severe")


class Run(msgspec.Struct, frozen=True, kw_only=True):
    """One execution with its result, as read.

    `offset` is the byte offset of the record in a file of lines, and the record's number in a file that
    is one document; `number` counts the file's records from 0. `responses` are on the scale on which
    they were written, NaN and infinities kept. `digest` identifies the content of the record.
    """

    id: str
    path: str
    offset: int
    number: int
    sequence: int | None = None
    started: datetime | None = None
    finished: datetime | None = None
    seed: str | None = None
    parent: str | None = None
    status: str | None = None
    stage: str | None = None
    completed: bool = True
    cell: dict[str, Level]
    nuisance: dict[str, Level]
    responses: dict[str, float]
    metadata: dict[str, Any]  # whatever JSON the record held besides
    digest: bytes


class Refusal(msgspec.Struct, frozen=True, kw_only=True):
    """A record that was not taken, and why. `kind` is `read`, `mapping`, `rewrite` or `file`."""

    path: str
    offset: int
    number: int
    reason: str
    kind: Literal["read", "mapping", "rewrite", "file"] = "mapping"
    id: str | None = None


class Source(msgspec.Struct, frozen=True, kw_only=True):
    """How far one file has been read, and what tells append, truncation, rotation and rewrite apart.

    `offset` counts the bytes that are taken, `head` is a hash of the first `n_head` bytes, `tail` of the
    last bytes before `offset`; `context` is what a reader needs to go on (a table's header and dialect).
    """

    path: str
    device: int
    inode: int
    size: int
    mtime_ns: int
    offset: int
    n_records: int
    n_head: int = 0
    head: bytes = b""
    tail: bytes = b""
    context: bytes = b""
    state: Literal["taken", "growing", "refused"] = "taken"


class Batch(msgspec.Struct, frozen=True, kw_only=True):
    """What one visit to one file gave: its new records and how far it has been read."""

    source: Source
    items: tuple[Run | Refusal, ...]
    change: Literal["new", "append", "truncated", "rotated", "rewritten"] = "new"


class Effect(msgspec.Struct, frozen=True, kw_only=True):
    """An effect with its interval, on the audited scale or as the name says."""

    name: str
    value: float
    low: float | None = None
    high: float | None = None


class Listed(msgspec.Struct, frozen=True, kw_only=True):
    """One thing that a warning's leading cause explains."""

    kind: str
    along: str | None = None
    level: str | None = None
    log_e: float | None = None


class Finding(msgspec.Struct, frozen=True, kw_only=True):
    """A check's answer that may become a warning.

    `key` names the condition: two findings of one key are one warning, and one that no longer `holds`
    withdraws it. `run` and `index` say where it was seen, `since` and `since_low`/`since_high` (positions)
    since when it is so. `n_again` counts the runs that have to be made again.
    """

    key: str
    kind: Kind
    message: str
    along: str | None = None
    level: str | None = None
    response: str | None = None
    run: str | None = None
    index: int | None = None
    n: int = 0
    since: int | None = None
    since_low: int | None = None
    since_high: int | None = None
    log_e: float | None = None
    threshold: float | None = None
    effect: Effect | None = None
    cells: tuple[str, ...] = ()
    share: float | None = None
    n_again: int | None = None
    explains: tuple[Listed, ...] = ()
    holds: bool = True


class Caution(msgspec.Struct, frozen=True, kw_only=True):
    """A warning as the operator sees it: a finding with consequence, remedy and state."""

    id: str
    finding: Finding
    grade: Grade
    state: State
    raised_at: datetime
    evidence_loss: float | None
    remedy: str
    answer: str | None = None


def normal_level(value: Any) -> Level:
    """Return a JSON value as a level: 1.0 becomes 1, a list or object its JSON text."""
    if isinstance(value, float) and value.is_integer() and abs(value) < 2**53:
        return int(value)
    if isinstance(value, (str, int, float, bool)) or value is None:
        return value
    return msgspec.json.encode(value, order="deterministic").decode()


def level_label(level: Level) -> str:
    """Return a level's label: a text bare, unless it reads like another JSON value, which stays quoted."""
    if not isinstance(level, str):
        return msgspec.json.encode(level).decode()
    try:
        msgspec.json.decode(level)
    except (msgspec.DecodeError, RecursionError):
        return level
    return msgspec.json.encode(level).decode()


def cell_label(cell: dict[str, Level]) -> str:
    """Return a cell's label: `solver=implicit mesh=fine`, or `all` where nothing is varied."""
    return " ".join(f"{name}={level_label(level)}" for name, level in cell.items()) or "all"
