"""The plan: what is measured, varied, may differ, and is to be compared; fixed before the first run.

Read from TOML, typed and validated; an unknown key is refused with the nearest valid one.
"""

from __future__ import annotations

import hashlib
import re
import typing
from pathlib import Path
from typing import Annotated, Any, Literal

import msgspec

from auditd.errors import PlanError
from auditd.records import Grade, Level, level_label, normal_level

AUTO_RESPONSES = ("duration", "completed")
"""Responses that are added by themselves when their fields exist."""
_DURATION = re.compile(r"(?P<count>\d+(?:\.\d+)?)\s*(?P<unit>ms|s|m|h|d|w)")
DURATION_MAX_S = 3652 * 86400.0
"""Ten years: longer than any campaign, and short enough for every clock's arithmetic."""
_UNIT_S = {"ms": 0.001, "s": 1.0, "m": 60.0, "h": 3600.0, "d": 86400.0, "w": 604800.0}
FREE_SECTIONS = ("landing", "alerts", "silence", "store", "report", "schedule")
"""Sections that may change without an amendment; they decide nothing about the verdict."""

Format = Literal["json", "ndjson", "csv", "parquet", "text"]


class Section(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A table of the plan; unknown keys are refused."""


class Campaign(Section, frozen=True, kw_only=True):
    """`[campaign]`."""

    title: str = "Campaign"
    alarm_budget: float = 0.05
    confidence: float = 0.95
    horizon: Annotated[int, msgspec.Meta(ge=1)] | None = None


class Landing(Section, frozen=True, kw_only=True):
    """`[landing]`: where files appear."""

    paths: list[str] = msgspec.field(default_factory=lambda: ["."])
    match: list[str] = msgspec.field(default_factory=list)
    format: Format | None = None
    pattern: str | None = None
    settle: str = "2s"
    watch: Literal["auto", "events", "poll"] = "auto"


class Record(Section, frozen=True, kw_only=True):
    """`[record]`: where a run's own facts stand, each a key or an RFC 6901 pointer."""

    id: str | None = None
    sequence: str | None = None
    started: str | None = None
    finished: str | None = None
    seed: str | None = None
    parent: str | None = None
    status: str | None = None
    completed: list[str] = msgspec.field(default_factory=lambda: ["ok"])
    zone: str | None = None


class Response(Section, frozen=True, kw_only=True):
    """`[responses.NAME]`."""

    at: str
    scale: Literal["linear", "log", "logit"] = "linear"
    margin: float | None = None
    unit: str | None = None


class Derived(Section, frozen=True, kw_only=True, rename={"source": "from"}):
    """A nuisance derived from a time: `{from = "started", by = "day"}`."""

    source: Literal["started", "finished"]
    by: Literal["day", "week", "hour"]


class Machines(Section, frozen=True, kw_only=True):
    """`[machines]`: which nuisances are held by `slots` runs at a time."""

    exclusive: list[str] = msgspec.field(default_factory=list)
    slots: Annotated[int, msgspec.Meta(ge=1)] = 1


class Order(Section, frozen=True, kw_only=True):
    """`[order]`: the sequence in which runs are audited."""

    by: Literal["sequence", "started", "arrival"] | None = None
    patience: str = "auto"


class Design(Section, frozen=True, kw_only=True):
    """`[design]`: whether results decide what runs next, and which cells are known to be deterministic."""

    allocation: Literal["fixed", "outcome"] = "fixed"
    stage: str | None = None
    deterministic: list[dict[str, Any]] = msgspec.field(default_factory=list)


class Baseline(Section, frozen=True, kw_only=True):
    """`[baseline]`: what is taken off a response before it is audited."""

    kind: Literal["cells", "pooled", "formula"] = "cells"
    formula: str | None = None


class Seeds(Section, frozen=True, kw_only=True):
    """`[seeds]`: whether a seed serves one run, or one run in each of several cells."""

    role: Literal["unique", "block"] = "unique"


class Schedule(Section, frozen=True, kw_only=True):
    """`[schedule]`: what `schedule` and `rehearse` plan for."""

    replicates: Annotated[int, msgspec.Meta(ge=1)] = 20
    hosts: list[str] = msgspec.field(default_factory=list)
    levels: dict[str, list[Any]] = msgspec.field(default_factory=dict)


class Report(Section, frozen=True, kw_only=True):
    """`[report]`: where the daemon keeps the page fresh."""

    path: str = "report.html"
    every: str = "15m"


class Comparison(Section, frozen=True, kw_only=True):
    """`[[comparisons]]`: two cells, or groups of cells, of one response."""

    response: str
    between: tuple[dict[str, Any], dict[str, Any]]


class Alert(Section, frozen=True, kw_only=True):
    """`[[alerts]]`: a command, or an address kept in a file or the environment."""

    to: Literal["command", "url"]
    argv: list[str] = msgspec.field(default_factory=list)
    url_file: str | None = None
    url_env: str | None = None
    grades: list[Grade] = msgspec.field(default_factory=lambda: ["material", "severe"])


class Silence(Section, frozen=True, kw_only=True):
    """`[silence]`: a warning when nothing lands for so long."""

    after: str


class StorePlace(Section, frozen=True, kw_only=True):
    """`[store]`."""

    url: str | None = None


class Tables(Section, frozen=True, kw_only=True):
    """All tables of a plan file."""

    campaign: Campaign = msgspec.field(default_factory=Campaign)
    landing: Landing = msgspec.field(default_factory=Landing)
    record: Record = msgspec.field(default_factory=Record)
    responses: dict[str, Response]
    factors: dict[str, str] = msgspec.field(default_factory=dict)
    nuisance: dict[str, str | Derived] = msgspec.field(default_factory=dict)
    machines: Machines = msgspec.field(default_factory=Machines)
    order: Order = msgspec.field(default_factory=Order)
    design: Design = msgspec.field(default_factory=Design)
    baseline: Baseline = msgspec.field(default_factory=Baseline)
    seeds: Seeds = msgspec.field(default_factory=Seeds)
    schedule: Schedule | None = None
    report: Report | None = None
    comparisons: list[Comparison] = msgspec.field(default_factory=list)
    alerts: list[Alert] = msgspec.field(default_factory=list)
    silence: Silence | None = None
    store: StorePlace = msgspec.field(default_factory=StorePlace)


class Plan(Tables, frozen=True, kw_only=True):
    """A validated plan, its text, and the file that it was read from."""

    text: str = ""
    path: Path = Path("plan.toml")

    @property
    def folder(self) -> Path:
        """The folder that relative paths of the plan start from."""
        return self.path.parent

    @property
    def audited_hash(self) -> str:
        """A hash over the fields that decide a verdict; a change of it needs `amend`."""
        kept = msgspec.to_builtins(self.audited_fields())
        return hashlib.blake2b(msgspec.json.encode(kept, order="deterministic"), digest_size=16).hexdigest()

    def audited_fields(self) -> dict[str, Any]:
        """The fields that decide a verdict, as plain data."""
        kept = {name: getattr(self, name) for name in Tables.__struct_fields__ if name not in FREE_SECTIONS}
        kept["campaign"] = {
            "alarm_budget": self.campaign.alarm_budget,
            "confidence": self.campaign.confidence,
        }
        return typing.cast("dict[str, Any]", msgspec.to_builtins(kept))


def duration_s(text: str, key: str = "duration") -> float:
    """Return the seconds of a duration such as `2s`, `15m`, `3h` or `1.5d`."""
    match = _DURATION.fullmatch(text.strip())
    if match is None:
        raise PlanError(f"{key}: {text!r} is not a duration; write a number and ms, s, m, h, d or w")
    seconds = float(match["count"]) * _UNIT_S[match["unit"]]
    if seconds > DURATION_MAX_S:
        raise PlanError(f"{key}: {text!r} is longer than ten years; write a shorter one")
    return seconds


def cells_matching(group: dict[str, Level], cell: dict[str, Level]) -> bool:
    """Whether a cell belongs to a comparison's group: every factor that the group names agrees.

    Levels are compared as JSON values: 1 and 1.0 are one, `true` and `"1"` others.
    """
    return all(
        name in cell and level_label(normal_level(level)) == level_label(cell[name])
        for name, level in group.items()
    )
