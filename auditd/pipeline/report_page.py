"""The report's parts put together."""

from __future__ import annotations

from auditd.checks.answer import Answer
from auditd.pipeline.report_facts import ReportFacts
from auditd.pipeline.report_record import (
    accounting_notes,
    accounting_table,
    deviation_sentences,
    epochs_table,
    looks_table,
    plans_shown,
    repeat_lines,
    warnings_shown,
)
from auditd.pipeline.report_responses import response_sections
from auditd.pipeline.report_words import (
    answer_sentences,
    methods_paragraphs,
    obstacle_sentences,
    unchecked_sentences,
)
from auditd.report.content import Content
from auditd.report.labels import figures, span
from auditd.report.picture import DataTable
from auditd.store.clock import rfc3339


def content_of(facts: ReportFacts) -> Content:
    """Return the page's content."""
    return Content(
        title=facts.plan.campaign.title,
        made_at=rfc3339(facts.now) or "",
        answer=answer_sentences(facts),
        obstacles=obstacle_sentences(facts),
        not_checked=unchecked_sentences(facts),
        responses=response_sections(facts),
        accounting=accounting_table(facts),
        accounting_notes=accounting_notes(facts),
        findings=_findings(facts.findings),
        warnings=warnings_shown(facts),
        deviations=deviation_sentences(facts),
        looks=looks_table(facts),
        plans=plans_shown(facts),
        epochs=epochs_table(facts),
        repeat=repeat_lines(facts),
        methods=methods_paragraphs(facts),
    )


def _findings(findings: list[Answer]) -> DataTable:
    return DataTable(
        headers=(
            "response",
            "check",
            "along",
            "verdict",
            "adjusted p",
            "p",
            "effect",
            "runs",
            "null",
            "assumes",
            "source",
        ),
        rows=tuple(_finding_row(one) for one in findings),
    )


def _finding_row(one: Answer) -> tuple[str, ...]:
    effect = one.effect
    shown = "" if effect is None else f"{effect.name} {figures(effect.value)}"
    if effect is not None and effect.low is not None:
        shown += f" ({span(effect.low, effect.high)})"
    return (
        one.response or "(design)",
        one.check,
        one.along,
        one.verdict if one.reason is None else f"{one.verdict}: {one.reason}",
        figures(one.adjusted_pvalue, 2),
        figures(one.pvalue, 2),
        shown,
        f"{one.n:,}",
        one.null,
        one.assumes,
        one.source,
    )
