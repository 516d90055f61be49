"""The report's sentences: the answer, what stands in the way, what was not checked, what was done."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np

from auditd import __version__
from auditd.pipeline.asking import Document
from auditd.pipeline.report_facts import ReportFacts
from auditd.plan import AUTO_RESPONSES
from auditd.records import GRADES, Caution
from auditd.report.labels import figures, listed, share, span
from auditd.series.load import order_of

_ORDERS = {
    "sequence": "their stated sequence number",
    "started": "their start",
    "arrival": "their arrival",
}
_EFFECTS = (
    ("drift", "a drift", " standard deviations"),
    ("icc", "an intraclass correlation", ""),
    ("ar", "a lag-1 correlation", ""),
)
_BASELINES = {
    "cells": "ranked within its cell among the earlier runs of that cell",
    "pooled": "taken as its deviation from the mean of the earlier runs of its cell, and ranked among all "
    "earlier ones",
    "formula": "taken as its recursive least-squares residual, and ranked among all earlier ones",
}


def answer_sentences(facts: ReportFacts) -> tuple[str, ...]:
    """Return the answer: runs, their worth, comparisons."""
    n = facts.n_runs
    n_refused = sum(facts.refused.values())
    if n == 0:
        refused = f" {n_refused:,} records were refused." if n_refused else ""
        return (f"No run has landed yet; there is nothing to say about this campaign.{refused}",)
    found = [_landed(facts, n_refused)]
    if n == 1:
        found.append("One run says nothing about dependence.")
    found += [
        worth_sentence(name, facts.weighed[name]) for name in facts.responses if name not in AUTO_RESPONSES
    ]
    planned = facts.compared
    if not planned:
        found.append("No comparison is planned.")
    estimable = sum(bool(one["estimable"]) for one in planned)
    if planned:
        found.append(
            f"Of {_count(len(planned), 'planned comparison')} {estimable:,} can be estimated: "
            + "; ".join(f"{one['response']}, {one['b']} less {one['a']}: {_verdict(one)}" for one in planned)
            + "."
        )
    return tuple(found)


def _landed(facts: ReportFacts, n_refused: int) -> str:
    done = int(facts.table.completed.sum())
    waiting = facts.n_runs - facts.n_placed - facts.n_late
    parts = [f"{_count(facts.n_runs, 'run')} landed, of which {done:,} completed"]
    if n_refused:
        parts.append(f"{_count(n_refused, 'record')} {'was' if n_refused == 1 else 'were'} refused")
    if waiting:
        parts.append(f"{waiting:,} wait for a place in the order and are not audited yet")
    if facts.n_late:
        parts.append(f"{facts.n_late:,} came after their place had passed and were never bet on")
    aside = int(facts.table.set_aside.sum())
    if aside:
        parts.append(f"{aside:,} are set aside")
    return "; ".join(parts) + "."


def worth_sentence(name: str, weighed: Document | None) -> str:
    """Return what a response's runs are worth."""
    if weighed is None:
        return f"{name}: too few completed runs, or results that do not vary, to say what they are worth."
    causes = [
        f"{cause} (factor {figures(factor, 2)})"
        for cause, factor in weighed["parts"].items()
        if factor < 0.995
    ]
    lost = (
        f"; {share(max(weighed['loss'], 0.0))} of the evidence is lost" if causes else "; no loss was found"
    )
    by = f", to {listed(causes)}" if causes else ""
    return (
        f"{name}: {weighed['n']:,} analysed runs are worth {figures(weighed['n_effective'])} independent "
        f"ones{lost}{by} "
        f"(95 % interval of the loss {100 * max(weighed['loss_low'], 0):.0f} to "
        f"{100 * weighed['loss_high']:.0f} %)."
    )


def _verdict(one: Document) -> str:
    if not one["estimable"]:
        return "cannot be estimated"
    interval = f"{figures(one['estimate'])} ({span(one['low'], one['high'])})"
    return f"{interval}, {one['verdict']}" if one["verdict"] else f"{interval}, no margin stated"


def obstacle_sentences(facts: ReportFacts) -> tuple[str, ...]:
    """Return what stands between the campaign and its comparisons: standing warnings, the gravest first."""
    standing = [one for one in facts.cautions if one.state == "standing" and one.grade != "note"]
    standing.sort(key=lambda one: -GRADES.index(one.grade))
    found = [f"{one.id}, {one.grade}: {one.finding.message}." for one in standing]
    found += [
        f"{one['response']}, {one['b']} less {one['a']}: {one['sentence']}"
        for one in facts.compared
        if not one["estimable"]
    ]
    n_notes = sum(one.state == "standing" and one.grade == "note" for one in facts.cautions)
    if n_notes:
        found.append(f"{_count(n_notes, 'note')} besides, of little consequence; see the warnings.")
    return tuple(found)


def unchecked_sentences(facts: ReportFacts) -> tuple[str, ...]:
    """Return what was not checked, and what would not have been seen."""
    found = list(facts.evidence.get("not_checked") or ["nothing has been weighed yet; run `runaudit gather`"])
    found += [sentence for sentence in facts.not_asked if sentence not in found]
    return tuple(_sentence(one) for one in [*found, *_unseen(facts)])


def _unseen(facts: ReportFacts) -> list[str]:
    """Return the effects that would have stayed unseen with probability 0.2, responses alike together."""
    alike: dict[str, list[str]] = {}
    for name, shown in (facts.status.get("responses") or {}).items():
        would = shown.get("would_see") or {}
        effects = [
            f"{words} of {figures(would[key], 2)}{unit}"
            for key, words, unit in _EFFECTS
            if would.get(key) is not None
        ]
        if effects:
            alike.setdefault(listed(effects), []).append(name)
    return [
        f"{listed(names)}: smaller effects may have stayed unseen. With probability 0.8 this design would "
        f"have shown {effects}"
        for effects, names in alike.items()
    ]


def _sentence(text: str) -> str:
    """Return a text with a full stop; a name at its beginning stays as it is written."""
    return text if text.endswith((".", "!", "?")) else f"{text}."


def methods_paragraphs(facts: ReportFacts) -> tuple[str, ...]:
    """Return paragraphs for a methods section, stating what was done."""
    if facts.n_runs == 0:
        return ("No run has landed; nothing was done that could be stated.",)
    return (_runs_paragraph(facts), _audit_paragraph(facts), _evidence_paragraph(facts))


def _runs_paragraph(facts: ReportFacts) -> str:
    table, plan = facts.table, facts.plan
    at = np.where(np.isnan(table.started), table.landed, table.started)
    when = f" between {_day(at.min())} and {_day(at.max())}" if table.n else ""
    parts = [
        f"{_count(facts.n_runs, 'run')} were made{when} under a plan fixed before the first run"
        + (f" and amended {_times(len(facts.versions) - 1)}" if len(facts.versions) > 1 else "")
        + f", and indexed with their order and circumstances (auditd {__version__})."
    ]
    if plan.factors:
        parts.append(
            f"Varied on purpose: {listed(list(plan.factors), n_most=20)} "
            f"({_count(len(table.cell_values), 'cell')} with runs)."
        )
    if plan.nuisance:
        parts.append(f"Recorded as circumstances: {listed(list(plan.nuisance), n_most=20)}.")
    n_failed = int((~table.completed).sum())
    if n_failed:
        parts.append(f"{_count(n_failed, 'run')} did not complete and entered no mean.")
    aside = int(table.set_aside.sum())
    parts.append(
        f"{_count(aside, 'run')} were set aside for stated reasons; results with and without them are "
        "reported."
        if aside
        else "No run was set aside."
    )
    return " ".join(parts)


def _audit_paragraph(facts: ReportFacts) -> str:
    plan = facts.plan
    if not any(path for path in facts.paths.values()):
        return "The sequential audit of dependence was withheld; see what was not checked."
    asked = ["serial dependence", "drift"]
    if plan.nuisance:
        asked.append(f"differences between levels of {listed(list(plan.nuisance))}")
    if plan.record.started or plan.record.finished:
        asked.append("daily and weekly cycles")
    asked.append("change of spread")
    if plan.record.parent:
        asked.append("inheritance from parent runs")
    kept = [one for one in facts.cautions if one.state != "withdrawn"]
    raised = f"{_count(len(kept), 'warning')} stand or were answered" if kept else "No warning was raised"
    return (
        f"Independence was audited run by run, in the order of {_ORDERS[order_of(plan)]}. Each response was "
        f"{_BASELINES[plan.baseline.kind]} (conformal ranks; Vovk, Gammerman & Shafer 2005). Bets against "
        "exchangeability "
        f"asked for {listed(asked)}; their e-processes raised a warning when the mean of all reached the "
        "inverse of the alarm "
        "budget. If runs were exchangeable within cells, the probability of any such warning over the "
        "whole campaign was at most "
        f"{figures(plan.campaign.alarm_budget)}, however often results were inspected (Ville 1939; Ramdas "
        "et al. 2023). "
        f"{raised}{_graded(kept)}."
    )


def _evidence_paragraph(facts: ReportFacts) -> str:
    parts = []
    worth = [
        f"{figures(one['n_effective'])} for {name} ({one['n']:,} runs)"
        for name in facts.responses
        if name not in AUTO_RESPONSES and (one := facts.weighed[name]) is not None
    ]
    if worth:
        parts.append(
            "The number of independent runs that would give the cells' means as exactly was "
            f"{listed(worth, n_most=12)}, after repeated results, lineage, batch effects and serial "
            "dependence."
        )
    if facts.compared:
        parts.append(_comparisons_sentence(facts))
    parts.append(
        "No evidence of dependence is not proof of independence; what was not checked is listed with the "
        "results."
    )
    return " ".join(parts)


def _comparisons_sentence(facts: ReportFacts) -> str:
    n, n_done = len(facts.compared), sum(bool(one["estimable"]) for one in facts.compared)
    level = figures(100 * facts.plan.campaign.confidence)
    looks = (
        f"they were looked at {_times(len(facts.looks))} by command before this report"
        if facts.looks
        else "nobody had looked at them by command before this report"
    )
    return (
        f"Of {_count(n, 'comparison')} planned beforehand {n_done:,} could be estimated, under the "
        f"dependence found, with joint {level} % intervals (Bonferroni); {looks}."
    )


def _graded(kept: list[Caution]) -> str:
    counts = {grade: sum(one.grade == grade for one in kept) for grade in reversed(GRADES)}
    named = [f"{count:,} {grade}" for grade, count in counts.items() if count]
    return f" ({listed(named)})" if named else ""


def _count(n: int, word: str) -> str:
    return f"{n:,} {word}{'' if n == 1 else 's'}"


def _times(n: int) -> str:
    return {1: "once", 2: "twice"}.get(n, f"{n:,} times")


def _day(at: float) -> str:
    return datetime.fromtimestamp(float(at), UTC).strftime("%-d %B %Y")
