"""The report's section of each response: what it is worth, and its pictures."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from auditd.pipeline.asking import Document
from auditd.pipeline.evidence_paths import MEAN
from auditd.pipeline.report_facts import ReportFacts
from auditd.pipeline.report_words import worth_sentence
from auditd.records import Caution, cell_label
from auditd.report.autocorrelation_chart import autocorrelation_chart
from auditd.report.batch_chart import batch_chart
from auditd.report.comparison_chart import comparison_chart
from auditd.report.content import ResponseSection
from auditd.report.evidence_chart import EvidencePath, evidence_chart
from auditd.report.labels import figures, visible
from auditd.report.lag_chart import lag_chart
from auditd.report.observed import Mark, Observed, deviations
from auditd.report.picture import DataTable, Picture, undrawn
from auditd.report.quantile_chart import quantile_chart
from auditd.report.run_chart import run_chart
from auditd.verdicts.message import SEQUENTIAL

N_NUISANCES = 4
"""Nuisances that have a batch plot; the page says how many more there are."""
N_CELLS = 200
"""Rows of the table of cells."""


def response_sections(facts: ReportFacts) -> list[ResponseSection]:
    """Return a section a response."""
    return [_section(facts, number, name) for number, name in enumerate(facts.responses)]


def _section(facts: ReportFacts, number: int, name: str) -> ResponseSection:
    key = f"response-{number + 1}"
    weighed = facts.weighed[name]
    observed = _observed(facts, name, key)
    sentences = [worth_sentence(name, weighed)]
    if weighed is not None:
        sentences += [f"{remark}." for remark in weighed["remarks"]]
    sentences += _beyond_scale(facts, name)
    if len(facts.plan.nuisance) > N_NUISANCES:
        sentences.append(
            f"Batch plots are drawn for the first {N_NUISANCES} of {len(facts.plan.nuisance)} nuisances."
        )
    return ResponseSection(
        key=key,
        name=name,
        sentences=tuple(sentences),
        cells=None if weighed is None else _cells(weighed),
        pictures=tuple(_pictures(facts, name, observed)),
    )


def _beyond_scale(facts: ReportFacts, name: str) -> list[str]:
    if name not in facts.plan.responses:
        return []
    scale = facts.plan.responses[name].scale
    return [] if scale == "linear" else [f"It is audited, drawn and compared on the {scale} scale."]


def _pictures(facts: ReportFacts, name: str, observed: Observed | None) -> list[Picture]:
    key = f"response-{facts.responses.index(name) + 1}"
    if observed is None:
        return [undrawn(f"{key}-runs", "Run chart", "no completed run has a number for this response")]
    along = next(iter(facts.plan.nuisance), None)
    found = [
        run_chart(observed, along),
        *_evidence(facts, name, observed),
    ]
    if name != "completed":
        found += [autocorrelation_chart(observed), lag_chart(observed), quantile_chart(observed)]
    found += [batch_chart(observed, nuisance) for nuisance in list(observed.nuisance)[:N_NUISANCES]]
    if name in facts.plan.responses:
        found.append(comparison_chart(name, observed.key, _compared(facts, name)))
    return found


def _observed(facts: ReportFacts, name: str, key: str) -> Observed | None:
    table, plan = facts.table, facts.plan
    series = table.series(plan, name, with_set_aside=True)
    if len(series.values) == 0:
        return None
    aside = table.set_aside[series.row]
    weighed = facts.weighed[name]
    return Observed(
        name=name,
        key=key,
        axis=_axis(facts, name),
        place=series.row.astype(np.float64),
        deviation=deviations(series.values, series.cells, aside),
        aside=aside,
        nuisance=series.nuisance,
        worth=None if weighed is None else min(weighed["n_effective"] / max(weighed["n"], 1), 1.0),
        n_cells=len(np.unique(series.cells.codes)),
        marks=[_mark(facts, one) for one in facts.cautions if _is_of(one, name)],
    )


def _axis(facts: ReportFacts, name: str) -> str:
    stated = facts.plan.responses.get(name)
    unit = "s" if name == "duration" else stated.unit if stated is not None else None
    if stated is not None and stated.scale != "linear":
        return f"{stated.scale} {name}, residual"
    return f"{name}{f' ({unit})' if unit else ''}, residual"


def _is_of(one: Caution, name: str) -> bool:
    finding = one.finding
    if one.state == "withdrawn":
        return False
    return (finding.kind in SEQUENTIAL and finding.response == name) or (
        finding.kind == "failure" and name == "completed"
    )


def _mark(facts: ReportFacts, one: Caution) -> Mark:
    finding = one.finding
    return Mark(
        label=one.id,
        since=facts.place_of(finding.since),
        since_low=facts.place_of(finding.since_low),
        since_high=facts.place_of(finding.since_high),
        raised=facts.place_of(finding.index),
    )


def _evidence(facts: ReportFacts, name: str, observed: Observed) -> list[Picture]:
    """Return the e-processes of a response, and of its parts where it is audited in parts."""
    titles = {title: None for epoch in facts.paths.values() for title in epoch if _belongs(title, name)}
    return [
        evidence_chart(
            title,
            observed.key if number == 0 else f"{observed.key}-part-{number}",
            _paths(facts, title),
            observed.marks,
        )
        for number, title in enumerate(titles or {name: None})
    ]


def _belongs(title: str, name: str) -> bool:
    return title == name or title.startswith(f"{name} (")


def _paths(facts: ReportFacts, title: str) -> list[EvidencePath]:
    return [
        _path(int(epoch), facts.paths[epoch][title])
        for epoch in sorted(facts.paths, key=int)
        if title in facts.paths[epoch]
    ]


def _path(epoch: int, stored: dict[str, Any]) -> EvidencePath:
    paths = stored["paths"]
    return EvidencePath(
        epoch=epoch,
        first=stored["first"],
        width=stored["width"],
        mean=paths.get(MEAN, []),
        families={family: path for family, path in paths.items() if family != MEAN},
        threshold_first=stored["threshold_first"],
        threshold_own=stored["threshold_own"],
    )


def _compared(facts: ReportFacts, name: str) -> Sequence[Document]:
    own = [one for one in facts.compared if one["response"] == name]
    beside = [
        one | {"b": f"{one['b']} (with set-aside runs)"}
        for one in facts.compared_with_aside
        if one["response"] == name
    ]
    return [*own, *beside]


def _cells(weighed: Document) -> DataTable:
    cells = weighed["cells"]
    return DataTable(
        headers=("cell", "runs", "worth"),
        rows=tuple(
            (visible(cell_label(one["cell"])), f"{one['n']:,}", figures(one["n_effective"]))
            for one in cells[:N_CELLS]
        ),
        note=f"The first {N_CELLS} of {len(cells):,} cells." if len(cells) > N_CELLS else "",
    )
