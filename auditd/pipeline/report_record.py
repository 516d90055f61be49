"""The report's record: runs accounted for, warnings, deviations, looks, plans, epochs, and its repetition."""

from __future__ import annotations

import platform
from collections.abc import Iterator
from importlib import metadata

import numpy as np

from auditd import __version__
from auditd.pipeline.campaign import plan_difference
from auditd.pipeline.report_facts import ReportFacts
from auditd.plan_reading import parse_plan
from auditd.records import Caution
from auditd.report.content import PlanShown, WarningShown
from auditd.report.labels import figures, share, span
from auditd.report.picture import DataTable
from auditd.report.quantile_envelope import SEED
from auditd.store.answers import Answer
from auditd.store.cautions import caution_number
from auditd.store.clock import rfc3339

LIBRARIES = ("numpy", "scipy", "statsmodels", "matplotlib", "sqlalchemy", "msgspec")


def accounting_table(facts: ReportFacts) -> DataTable:
    """Return what became of every run, a response a column; each column adds up."""
    table, plan = facts.table, facts.plan
    columns = []
    for name in facts.responses:
        own = table.completed | (name == "completed")
        number = np.isfinite(table.audited(plan, name))
        analysed = table.usable(plan, name)
        scored = _scored(facts, name)
        columns.append(
            (
                f"{table.n:,}",
                f"− {int((~own).sum()):,}",
                f"− {int((own & ~number).sum()):,}",
                f"− {int((own & number & table.set_aside).sum()):,}",
                f"{int(analysed.sum()):,}",
                f"{int((analysed & (table.positions >= 0)).sum()):,}",
                "–" if scored is None else f"{scored:,}",
            )
        )
    words = (
        "runs landed",
        "not completed",
        "no number on the audited scale",
        "set aside by an answer",
        "= analysed",
        "of these with a place in the order",
        "scored by the sequential audit (newest epoch)",
    )
    rows = tuple((word, *(column[k] for column in columns)) for k, word in enumerate(words))
    return DataTable(headers=("", *facts.responses), rows=rows)


def accounting_notes(facts: ReportFacts) -> tuple[str, ...]:
    """Return how records, runs and places add up."""
    n_refused = sum(facts.refused.values())
    kinds = ", ".join(f"{kind} {count:,}" for kind, count in facts.refused.items())
    waiting = facts.n_runs - facts.n_placed - facts.n_late
    n, refused = facts.n_runs, f"{n_refused:,} refused{f' ({kinds})' if kinds else ''}"
    found = [
        f"{n + n_refused:,} records read = {n:,} runs + {refused}.",
        f"{n:,} runs = {facts.n_placed:,} placed in the order + {facts.n_late:,} late + {waiting:,} waiting.",
    ]
    if facts.n_runs != facts.table.n:
        found.append(
            f"{facts.n_runs - facts.table.n:,} runs are stored but not taken up by the auditor yet; they "
            "are in no table here."
        )
    no_time = int(np.isnan(facts.table.started).sum())
    if facts.table.n and facts.plan.record.started is None:
        found.append("No run states when it started, so nothing here is told by time.")
    elif no_time:
        found.append(f"{no_time:,} of {facts.table.n:,} runs state no start.")
    return tuple(found)


def _scored(facts: ReportFacts, name: str) -> int | None:
    newest = max(facts.paths, key=int, default=None)
    kept = {} if newest is None else facts.paths[newest]
    return max(
        (one["n_scored"] for title, one in kept.items() if title == name or title.startswith(f"{name} (")),
        default=None,
    )


def warnings_shown(facts: ReportFacts) -> list[WarningShown]:
    """Return every warning with its answers."""
    return [_warning(one, facts) for one in facts.cautions]


def _warning(one: Caution, facts: ReportFacts) -> WarningShown:
    finding = one.finding
    where = " ".join(part for part in (finding.along, finding.level) if part)
    of = f" in {finding.response}" if finding.response else ""
    number = caution_number(one.id)
    return WarningShown(
        id=one.id,
        grade=one.grade,
        state=one.state,
        headline=f"{one.id}: {finding.kind}{f' {where}' if where else ''}{of}",
        message=f"{finding.message}.",
        remedy=one.remedy,
        facts=tuple((name, text) for name, text in _known(one) if text),
        answers=tuple(_answer(reply) for reply in facts.answers if reply.caution == number),
    )


def _known(one: Caution) -> Iterator[tuple[str, str]]:
    """Yield what is known of a warning, by name; empty where it does not apply."""
    finding = one.finding
    effect = finding.effect
    yield "state", one.state
    at = f", at run {finding.run}{_at(finding.index)}" if finding.run else ""
    yield "raised", f"{rfc3339(one.raised_at)}{at}"
    if finding.since is not None:
        known = finding.since_low is not None and finding.since_high is not None
        within = f"; not excluded: {finding.since_low} to {finding.since_high}" if known else ""
        yield "since", f"place {finding.since}{within}"
    if finding.log_e is not None:
        threshold = figures(finding.threshold)
        yield "evidence", f"natural log of the e-value {figures(finding.log_e)}, threshold {threshold}"
    if effect is not None:
        yield "effect", f"{effect.name} {figures(effect.value)} ({span(effect.low, effect.high)})"
    if one.evidence_loss is not None:
        yield "evidence lost", share(one.evidence_loss)
    yield (
        "explains also",
        ", ".join(
            " ".join(part for part in (also.kind, also.along, also.level) if part)
            for also in finding.explains
        ),
    )


def _at(index: int | None) -> str:
    return "" if index is None else f" (place {index})"


def _answer(reply: Answer) -> str:
    scope = " ".join(f"{name}={level}" for name, level in reply.scope.items())
    begin = "" if reply.from_position is None else f", from place {reply.from_position}"
    return (
        f"{rfc3339(reply.answered_at)} ({reply.action}{f' {scope}' if scope else ''}{begin}): {reply.reason}"
    )


def deviation_sentences(facts: ReportFacts) -> tuple[str, ...]:
    """Return what was done otherwise than planned, or decided while the campaign ran."""
    found = [
        f"Plan version {one.version}, {rfc3339(one.taken_at)}, from place {one.from_position}: "
        f"{one.reason or 'no reason is stored'}."
        for one in facts.versions[1:]
    ]
    found += [
        f"W{reply.caution}, {reply.action}: {_answer(reply)}"
        for reply in facts.answers
        if reply.action != "noted"
    ]
    found += [
        f"Epoch {one.epoch}, {rfc3339(one.opened_at)}, from place {one.from_position}: {one.reason}."
        for one in facts.epochs[1:]
    ]
    let_in = [one for one in facts.flushes if one[3] != "gather ended"]
    if let_in:
        found.append(
            f"{sum(one[2] for one in let_in):,} runs were let into the order without waiting longer for "
            f"earlier ones, at {len(let_in):,} moments."
        )
    if facts.n_late:
        found.append(f"{facts.n_late:,} runs came after their place had passed and were never bet on.")
    return tuple(found)


def looks_table(facts: ReportFacts) -> DataTable:
    """Return every look at the comparisons."""
    return DataTable(
        headers=("look", "at", "command", "runs then", "what was seen"),
        rows=tuple(
            (str(k + 1), rfc3339(one.at) or "", one.command, f"{one.n_runs:,}", _seen(one.body))
            for k, one in enumerate(facts.looks)
        ),
        note="Whoever looks repeatedly and may stop early goes by the interval at any look.",
    )


def _seen(body: object) -> str:
    if not isinstance(body, list):
        return ""
    return "; ".join(
        f"{one.get('response')}, {one.get('b')} less {one.get('a')}: "
        + (
            f"{figures(one['estimate'])} ({span(one['low'], one['high'])})"
            if one.get("estimable")
            else "not estimable"
        )
        for one in body[:8]
    )


def plans_shown(facts: ReportFacts) -> list[PlanShown]:
    """Return the plan's versions with what changed."""
    found = []
    earlier = None
    for one in facts.versions:
        plan = parse_plan(one.text, facts.plan.path)
        changes = () if earlier is None else tuple(plan_difference(earlier, plan))
        reason = f": {one.reason}" if one.reason else ""
        found.append(
            PlanShown(
                version=one.version,
                line=f"Version {one.version}, {rfc3339(one.taken_at)}, from place {one.from_position}, "
                f"hash {one.hash}{reason}",
                changes=changes,
                text=one.text,
            )
        )
        earlier = plan
    return found


def epochs_table(facts: ReportFacts) -> DataTable:
    """Return the epochs with their keys, from which the audit can be made anew."""
    return DataTable(
        headers=(
            "epoch",
            "opened",
            "from place",
            "plan version",
            "scope",
            "reason",
            "key of the randomisers",
        ),
        rows=tuple(
            (
                str(one.epoch),
                rfc3339(one.opened_at) or "",
                str(one.from_position),
                str(one.plan_version),
                " ".join(f"{name}={level}" for name, level in one.scope.items()) or "all runs",
                one.reason,
                one.key.hex(),
            )
            for one in facts.epochs
        ),
    )


def repeat_lines(facts: ReportFacts) -> tuple[tuple[str, str], ...]:
    """Return what is needed to make the analysis again."""
    versions = ", ".join(f"{name} {metadata.version(name)}" for name in LIBRARIES)
    return (
        ("made by", f"auditd {__version__} on Python {platform.python_version()}"),
        ("libraries", versions),
        ("plan", facts.versions[-1].hash if facts.versions else "none taken into use yet"),
        ("seeds", f"epochs' keys as listed; quantile envelope {SEED}; all others are fixed in the release"),
        ("audit anew", "runaudit store verify"),
        ("comparisons", "runaudit compare"),
        ("this page", f"SOURCE_DATE_EPOCH={int(facts.now.timestamp())} runaudit report"),
    )
