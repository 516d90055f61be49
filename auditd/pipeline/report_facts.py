"""What the report rests on, read from the store at one moment and computed from it."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import Any

import msgspec
import numpy as np
from sqlalchemy import Connection, func, select

from auditd.checks.answer import Answer as Finding
from auditd.pipeline.asking import Document
from auditd.pipeline.campaign import Campaign, plan_in_use
from auditd.pipeline.comparing import compare_document, planned_questions
from auditd.pipeline.full_audit import findings_of
from auditd.pipeline.weighing import weigh
from auditd.plan import Plan
from auditd.records import Caution
from auditd.series.load import load_table, response_names
from auditd.series.table import RunTable
from auditd.store.answers import Answer, stored_answers
from auditd.store.cautions import stored_cautions
from auditd.store.looks import Look, stored_looks
from auditd.store.plans import Epoch, PlanVersion, plan_versions, stored_epochs
from auditd.store.runs import count_runs
from auditd.store.states import stored_display, stored_flushes
from auditd.store.tables import refusals


class ReportFacts(msgspec.Struct, frozen=True, kw_only=True):
    """Everything that the page says, before it is put into words and pictures."""

    plan: Plan
    now: datetime
    table: RunTable
    n_runs: int
    n_placed: int
    n_late: int
    refused: dict[str, int]
    versions: list[PlanVersion]
    epochs: list[Epoch]
    cautions: list[Caution]
    answers: list[Answer]
    looks: list[Look]
    flushes: list[tuple[datetime, int, int, str]]
    paths: Mapping[str, Any]  # a JSON document
    status: Mapping[str, Any]  # a JSON document
    evidence: Mapping[str, Any]  # a JSON document
    weighed: dict[str, Document | None]
    compared: list[Document]
    compared_with_aside: list[Document]
    findings: list[Finding]
    not_asked: list[str]

    @property
    def responses(self) -> tuple[str, ...]:
        """The responses, in the plan's order, and those added by themselves."""
        return response_names(self.plan)

    def place_of(self, position: int | None) -> float | None:
        """Return the place in the true order, late runs included, of a position."""
        if position is None:
            return None
        rows = np.flatnonzero(self.table.positions >= 0)
        if not len(rows):
            return None
        held = self.table.positions[rows]
        order = np.argsort(held, kind="stable")
        at = int(np.searchsorted(held[order], position))
        return float(rows[order[min(at, len(rows) - 1)]])


def report_facts(campaign: Campaign, now: datetime) -> ReportFacts:
    """Read and compute what the page needs."""
    with campaign.engine.connect() as connection:
        plan = plan_in_use(connection, campaign.plan)
        table = load_table(connection, plan)
        counts = count_runs(connection)
        stored: dict[str, Any] = {
            "refused": _refused(connection),
            "versions": plan_versions(connection),
            "epochs": stored_epochs(connection),
            "cautions": stored_cautions(connection),
            "answers": stored_answers(connection),
            "looks": stored_looks(connection),
            "flushes": stored_flushes(connection),
            **{name: stored_display(connection, name) or {} for name in ("paths", "status", "evidence")},
        }
    questions = planned_questions(plan)
    findings, not_asked = findings_of(table, plan)
    return ReportFacts(
        plan=plan,
        now=now,
        table=table,
        n_runs=counts.n,
        n_placed=counts.n_placed,
        n_late=counts.n_late,
        weighed={name: weigh(table, plan, name) for name in response_names(plan)},
        compared=compare_document(table, plan, questions),
        compared_with_aside=compare_document(table, plan, questions, with_set_aside=True)
        if table.set_aside.any()
        else [],
        findings=findings,
        not_asked=not_asked,
        **stored,
    )


def _refused(connection: Connection) -> dict[str, int]:
    query = select(refusals.c.kind, func.count()).group_by(refusals.c.kind).order_by(refusals.c.kind)
    return {row[0]: row[1] for row in connection.execute(query)}
