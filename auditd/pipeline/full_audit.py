"""`audit`: one look at everything with the classical checks."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

from auditd.checks.answer import Answer
from auditd.checks.design_questions import design_answers, tiny_association
from auditd.checks.full_audit import adjusted, audit_series
from auditd.checks.remarks import joined
from auditd.pipeline.asking import Document, effect_document
from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.stored_evidence import evidence_document
from auditd.plan import Plan
from auditd.series.load import load_table, response_names
from auditd.series.table import RunTable

N_AT_ONCE = 2
"""Responses audited at once: sorting and sums leave the interpreter free, and each needs about 100 bytes a
run for every view that it holds, so that more would cost memory."""


def audit(plan_path: Path) -> Document:
    """Return what `audit --json` shows: findings, those of shape apart, and what was not checked."""
    campaign = open_for_queries(plan_path)
    with campaign.engine.connect() as connection:
        table = load_table(connection, campaign.plan)
    findings, not_checked = findings_of(table, campaign.plan)
    not_checked += [
        sentence for sentence in evidence_document(campaign)["not_checked"] if sentence not in not_checked
    ]
    return {
        "schema": 1,
        "findings": [answer_document(one) for one in findings if one.family != "shape"],
        "shape": [answer_document(one) for one in findings if one.family == "shape"],
        "not_checked": not_checked,
    }


def findings_of(table: RunTable, plan: Plan) -> tuple[list[Answer], list[str]]:
    """Return every finding about a campaign's runs, and sentences on what was not asked."""

    def ask(response: str) -> tuple[list[Answer], list[str]]:
        stated = plan.responses.get(response)
        margin = None if stated is None else stated.margin
        return audit_series(table.series(plan, response), margin=margin)

    with ThreadPoolExecutor(N_AT_ONCE) as pool:
        of_responses = list(pool.map(ask, response_names(plan)))
    findings = [one for answers, _ in of_responses for one in answers]
    not_asked = [sentence for _, sentences in of_responses for sentence in sentences]
    about_design = adjusted(list(design_answers(table)))
    findings += [joined(one, tiny_association(one)) for one in about_design]
    n_aside = int(table.set_aside.sum())
    if n_aside:
        not_asked.append(f"{n_aside} runs that were set aside are left out")
    return findings, not_asked


def answer_document(one: Answer) -> Document:
    """Return one finding as `audit --json` shows it."""
    return {
        "response": one.response,
        "check": one.check,
        "along": one.along,
        "null": one.null,
        "statistic": one.statistic,
        "pvalue": one.pvalue,
        "adjusted_pvalue": one.adjusted_pvalue,
        "effect": effect_document(one.effect),
        "n": one.n,
        "verdict": one.verdict,
        "reason": one.reason,
        "assumes": one.assumes,
        "source": one.source,
    }
