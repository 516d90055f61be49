"""What the campaign is worth by now, computed by the daemon and stored, so that queries only read."""

from __future__ import annotations

import time
from collections.abc import Mapping
from typing import Any

import numpy as np
from sqlalchemy import Connection

from auditd.errors import BadInput, NotTestable
from auditd.pipeline.asking import Document
from auditd.pipeline.auditing import ORDER_KINDS, Audit
from auditd.pipeline.circumstances import circumstances
from auditd.pipeline.comparing import compare_document, planned_questions
from auditd.pipeline.evidence_paths import paths_document
from auditd.pipeline.order_watch import order_findings
from auditd.pipeline.session import Session
from auditd.plan import Plan
from auditd.series.load import load_table
from auditd.series.strips import strip
from auditd.series.table import Ints, RunTable, Series
from auditd.store.clock import now_us
from auditd.store.states import save_display

GROWTH = 1.02
"""Displays are computed again when the runs have grown by so much …"""
REST_FACTOR = 30.0
"""… and so many times what the last computation took has passed, so that it costs a few per cent at most."""
STALE_S = 60.0
"""… or when runs have come and so long has passed."""
REST_MAX_S = 900.0


N_CELL_OWN = 50
"""Runs of a cell from which its worth is computed from its own runs …"""
N_CELLS_OWN = 50
"""… in a campaign of so many cells at most."""
STEERED = (
    "results decide what runs next (design.allocation), and no stage is stated: even independent runs would "
    "alarm, so the sequential audit is withheld; state design.stage"
)
NO_BLOCKS = (
    "seeds come in blocks, and the schedule names no cells by every factor's levels, so that no block can be "
    "called complete: the sequential audit is withheld; state schedule.levels"
)
BETWEEN_STAGES = (
    "changes from one stage to the next: results decide what runs next, so only runs of one stage are ranked "
    "among each other"
)
NO_ORDER = (
    f"{', '.join(ORDER_KINDS)}: no order can be established, since runs landed in whole tables without a "
    "sequence number or a start; state record.sequence or record.started"
)


class Weigher:
    """Computes the displays when it is due.

    Parameters
    ----------
    session : whose campaign is weighed.
    """

    def __init__(self, session: Session) -> None:
        self._session = session
        self._n_shown = -1
        self._due_at = 0.0
        self._shown_at = 0.0

    def refresh_if_due(self) -> bool:
        """Compute the displays if runs have come and the last computation is long enough ago."""
        now = time.monotonic()
        n = self._session.n_placed + self._session.n_arrived
        if n == self._n_shown or now < self._due_at:
            return False
        if n < GROWTH * self._n_shown and now < self._shown_at + STALE_S:
            return False
        began = time.monotonic()
        refresh(self._session)
        self._shown_at = time.monotonic()
        self._n_shown = n
        self._due_at = self._shown_at + min(REST_FACTOR * (self._shown_at - began), REST_MAX_S)
        return True


def refresh(session: Session) -> None:
    """Compute and store what `status`, `evidence` and the report show; regrade the standing warnings."""
    plan = session.plan
    with session.campaign.engine.connect() as connection:
        table = load_table(connection, plan)
    weighed = {name: weigh(table, plan, name) for name in session.audit.responses}
    compared = compare_document(table, plan, planned_questions(plan))
    status = {
        "scored": session.audit.n_scored(),
        "withheld": withheld_sentences(session),
        "responses": {
            name: _status_of(found, _losses(compared, name), _would_see(table, plan, name, session.audit))
            for name, found in weighed.items()
            if found is not None
        },
        "strips": {name: strip(table, plan, name) for name in session.audit.responses},
        "comparisons": compared,
    }
    evidence = {
        "schema": 1,
        "n": table.n,
        "responses": {name: found for name, found in weighed.items() if found is not None},
        "not_checked": not_checked(session, weighed),
    }
    with session.campaign.engine.begin() as connection:
        save_display(connection, "status", now_us(), status)
        save_display(connection, "evidence", now_us(), evidence)
        save_display(connection, "paths", now_us(), _paths(connection, session.audit))
        session.raiser.raise_facts(connection, order_findings(table, plan))
        session.raiser.regrade(connection, table, session.audit)


def _paths(connection: Connection, audit: Audit) -> Document:
    recorders = {track.title: (track.recorder, track.auditor) for track in audit.tracks}
    return paths_document(connection, audit.epoch.epoch, audit.epoch.from_position, recorders)


def weigh(table: RunTable, plan: Plan, response: str) -> Document | None:
    """Return a response's effective number, whole and by cell; None where there is too little."""
    from auditd.evidence import effective_number

    series = table.series(plan, response)
    try:
        found = effective_number(series.values, **circumstances(table, series))
    except (NotTestable, BadInput):
        return None
    return {
        "n": found.n,
        "n_effective": found.n_effective,
        "loss": found.loss,
        "loss_low": found.loss_low,
        "loss_high": found.loss_high,
        "parts": dict(found.parts),
        "remarks": list(found.remarks),
        "cells": _by_cell(table, series, found.n_effective / max(found.n, 1)),
    }


def _by_cell(table: RunTable, series: Series, worth: float) -> list[Document]:
    """Return each cell's runs and their worth: by its own runs where they suffice, else the whole rate."""
    from auditd.evidence import effective_number

    known = circumstances(table, series)
    codes = np.unique(series.cells.codes)
    found = []
    for code in codes:
        of_cell = np.flatnonzero(series.cells.codes == code)
        n = len(of_cell)
        n_effective = min(float(len(np.unique(known["duplicates"][of_cell]))), n * worth)
        if n >= N_CELL_OWN and len(codes) <= N_CELLS_OWN and table.parents is None:
            own = _of_cell(known, of_cell)
            try:
                n_effective = effective_number(series.values[of_cell], **own).n_effective
            except (NotTestable, BadInput):  # constant, say: one result again and again
                n_effective = min(n_effective, float(len(np.unique(known["duplicates"][of_cell]))))
        found.append({"cell": dict(table.cell_values[code]), "n": n, "n_effective": n_effective})
    return found


def _of_cell(known: dict[str, Any], rows: Ints) -> dict[str, Any]:
    nuisance = {name: labels[rows] for name, labels in known["nuisance"].items()}
    return {
        "cells": known["cells"][rows],
        "nuisance": {name: labels for name, labels in nuisance.items() if len(set(labels.tolist())) > 1},
        "duplicates": known["duplicates"][rows],
        "ordered": known["ordered"],
    }


def _losses(compared: list[Document], response: str) -> list[float]:
    """Return the losses of a response's planned comparisons, as `compare` tells them."""
    return [one["loss"] for one in compared if one["response"] == response and one["loss"] is not None]


def _status_of(weighed: Mapping[str, Any], losses: list[float], would_see: Document | None) -> Document:
    loss = max(losses, default=weighed["loss"])
    return {
        "n": weighed["n"],
        "n_effective": weighed["n_effective"],
        "evidence_loss": max(float(loss), 0.0),
        "would_see": would_see,
    }


def _would_see(table: RunTable, plan: Plan, response: str, audit: Audit) -> dict[str, float | None] | None:
    """Return the smallest effects that this design would have shown by now with probability 0.8."""
    from auditd.schedule import would_see

    track = audit.track_of(response)
    if track is None or track.auditor.n_scored == 0:
        return None
    auditor = track.auditor
    series = table.series(plan, response)
    return would_see(
        auditor.n_scored,
        n_asked=auditor.n_asked,
        level_counts={
            name: np.bincount(coded.codes, minlength=len(coded.levels)).tolist()
            for name, coded in series.nuisance.items()
        },
        alarm_budget=auditor.options.alarm_budget,
    )


def withheld_sentences(session: Session) -> list[str]:
    """Return what the sequential audit does not ask, and why, in sentences."""
    left_out = session.audit.withheld
    if not left_out:
        in_blocks = session.plan.seeds.role == "block"
        return [NO_BLOCKS] if in_blocks and not session.audit.tracks else []
    if session.plan.design.allocation == "outcome":
        return [STEERED]
    return [NO_ORDER]


def not_checked(session: Session, weighed: Mapping[str, Document | None]) -> list[str]:
    """Return what could not be checked, in sentences."""
    plan = session.plan
    found = withheld_sentences(session)
    if plan.design.allocation == "outcome" and plan.design.stage is not None:
        found.append(BETWEEN_STAGES)
    found += [f"{name}: too few completed runs to weigh" for name, one in weighed.items() if one is None]
    for stated, words in (
        (plan.record.seed, "seeds: record.seed is not stated, so ignored and reused seeds cannot be seen"),
        (
            plan.record.started,
            "time: record.started is not stated, so daily cycles and overlaps cannot be seen",
        ),
        (plan.record.parent, "lineage: record.parent is not stated, so inherited state cannot be seen"),
        (plan.nuisance or None, "batch effects: the plan names no nuisance such as host or build"),
    ):
        if stated is None:
            found.append(words)
    found.append("a dependence that is the same in every run cannot be seen from the runs")
    return found
