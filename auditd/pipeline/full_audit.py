"""`audit`: one look at everything with the classical checks."""

from __future__ import annotations

from pathlib import Path

from auditd.checks.answer import Answer
from auditd.checks.design_questions import design_answers
from auditd.checks.full_audit import adjusted, audit_series
from auditd.pipeline.asking import Document
from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.stored_evidence import evidence_document
from auditd.series.load import load_table, response_names


def audit(plan_path: Path) -> Document:
    """Return what `audit --json` shows: findings, those of shape apart, and what was not checked."""
    campaign = open_for_queries(plan_path)
    with campaign.engine.connect() as connection:
        table = load_table(connection, campaign.plan)
    findings: list[Answer] = []
    not_checked: list[str] = []
    for response in response_names(campaign.plan):
        answers, sentences = audit_series(table.series(campaign.plan, response))
        findings += answers
        not_checked += sentences
    findings += adjusted(list(design_answers(table)))
    not_checked += [
        sentence for sentence in evidence_document(campaign)["not_checked"] if sentence not in not_checked
    ]
    return {
        "schema": 1,
        "findings": [answer_document(one) for one in findings if one.family != "shape"],
        "shape": [answer_document(one) for one in findings if one.family == "shape"],
        "not_checked": not_checked,
    }


def answer_document(one: Answer) -> Document:
    """Return one finding as `audit --json` shows it."""
    effect = one.effect
    return {
        "response": one.response,
        "check": one.check,
        "along": one.along,
        "null": one.null,
        "statistic": one.statistic,
        "pvalue": one.pvalue,
        "adjusted_pvalue": one.adjusted_pvalue,
        "effect": None
        if effect is None
        else {"name": effect.name, "value": effect.value, "low": effect.low, "high": effect.high},
        "n": one.n,
        "verdict": one.verdict,
        "reason": one.reason,
        "assumes": one.assumes,
        "source": one.source,
    }
