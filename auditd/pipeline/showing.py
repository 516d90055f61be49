"""One warning or one run in full."""

from __future__ import annotations

from auditd.pipeline.asking import Document, caution_document, find_caution, find_run, run_document
from auditd.pipeline.campaign import Campaign
from auditd.records import Caution
from auditd.series.terminal_chart import chart_lines
from auditd.series.terminal_evidence import evidence_lines
from auditd.store.answers import stored_answers
from auditd.store.cautions import caution_number, stored_cautions
from auditd.store.clock import rfc3339
from auditd.store.states import stored_display
from auditd.store.tables import answers, cautions
from auditd.verdicts.explanations import explain


def warning_shown(campaign: Campaign, name: str) -> Document:
    """Return a warning with its answers, a chart in plain characters, and what its kind asks."""
    found = find_caution(campaign, name)
    with campaign.engine.connect() as connection:
        replies = stored_answers(connection, answers.c.caution == caution_number(found.id))
        shown = stored_display(connection, "status") or {}
        paths = stored_display(connection, "paths") or {}
    return {
        "schema": 1,
        "warning": caution_document(found),
        "answers": [
            {
                "at": rfc3339(one.answered_at),
                "reason": one.reason,
                "action": one.action,
                "scope": one.scope,
                "from_position": one.from_position,
            }
            for one in replies
        ],
        "chart": _chart(found, shown),
        "evidence_chart": _evidence_chart(found, paths),
        "explanation": explain(found.finding.kind).asks,
    }


def _chart(found: Caution, shown: Document) -> list[str]:
    strip = shown.get("strips", {}).get(found.finding.response)
    return (
        []
        if not strip or not strip["n"]
        else chart_lines(strip, since=found.finding.since, raised=found.finding.index)
    )


def _evidence_chart(found: Caution, paths: Document) -> list[str]:
    """Return the e-process of the warning's family in its newest epoch; empty where it has none."""
    finding = found.finding
    family = f"{finding.kind} along {finding.along}"
    for epoch in sorted(paths, key=int, reverse=True):
        kept = paths[epoch].get(finding.response)
        if kept is not None and finding.log_e is not None and family in kept["paths"]:
            return evidence_lines(
                kept["paths"][family],
                first=kept["first"],
                width=kept["width"],
                threshold=kept["threshold_own"],
                raised=finding.index,
            )
    return []


def run_shown(campaign: Campaign, name: str) -> Document:
    """Return a run, and the warnings that were raised at it."""
    stored = find_run(campaign, name)
    with campaign.engine.connect() as connection:
        raised = stored_cautions(connection, cautions.c.run == name)
    return {
        "schema": 1,
        "run": run_document(stored),
        "warnings": [caution_document(one) for one in raised],
    }
