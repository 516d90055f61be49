"""What the page holds, as plain data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from auditd.report.picture import DataTable, Picture


@dataclass(frozen=True, kw_only=True)
class ResponseSection:
    """One response: what it is worth, in sentences and cells, and its pictures."""

    key: str
    name: str
    sentences: tuple[str, ...]
    cells: DataTable | None
    pictures: tuple[Picture, ...]


@dataclass(frozen=True, kw_only=True)
class WarningShown:
    """A warning with its answers."""

    id: str
    grade: str
    state: str
    headline: str
    message: str
    remedy: str
    facts: tuple[tuple[str, str], ...]
    answers: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class PlanShown:
    """A version of the plan: when and why it was taken into use, what changed, and its text."""

    version: int
    line: str
    changes: tuple[str, ...]
    text: str


@dataclass(frozen=True, kw_only=True)
class Content:
    """The whole page; every text is plain and is escaped when it is set."""

    title: str
    made_at: str
    answer: tuple[str, ...]
    obstacles: tuple[str, ...]
    not_checked: tuple[str, ...]
    responses: Sequence[ResponseSection]
    accounting: DataTable
    accounting_notes: tuple[str, ...]
    findings: DataTable
    warnings: Sequence[WarningShown]
    deviations: tuple[str, ...]
    looks: DataTable
    plans: Sequence[PlanShown]
    epochs: DataTable
    repeat: tuple[tuple[str, str], ...]
    methods: tuple[str, ...]
