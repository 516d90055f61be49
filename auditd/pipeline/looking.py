"""`compare`: the comparisons, computed now, and the look kept for ever."""

from __future__ import annotations

from pathlib import Path

from auditd.pipeline.asking import Document
from auditd.pipeline.campaign import open_for_replies
from auditd.pipeline.comparing import compare_document, planned_questions, questions_of
from auditd.series.load import load_table
from auditd.store.clock import now_us
from auditd.store.looks import save_look


def compare(plan_path: Path, a: str | None = None, b: str | None = None) -> Document:
    """Return what `compare --json` shows: the planned comparisons, or those of two groups; logs the look.

    Where runs were set aside, `with_set_aside` holds the same comparisons with them.
    """
    campaign = open_for_replies(plan_path)
    plan = campaign.plan
    with campaign.engine.connect() as connection:
        table = load_table(connection, plan)
    questions = planned_questions(plan) if a is None or b is None else questions_of(plan, a, b)
    document: Document = {"schema": 1, "comparisons": compare_document(table, plan, questions)}
    if table.set_aside.any():
        document["set_aside"] = int(table.set_aside.sum())
        document["with_set_aside"] = compare_document(table, plan, questions, with_set_aside=True)
    with campaign.engine.begin() as connection:
        document["look"] = save_look(
            connection, looked_us=now_us(), command="compare", n_runs=table.n, body=document["comparisons"]
        )
    return document
