"""A finding made into the warning that an operator sees."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime

import msgspec

from auditd.plan import Plan
from auditd.records import Caution, Finding, Grade
from auditd.verdicts.likely_cause import likely_cause
from auditd.verdicts.message import message
from auditd.verdicts.moments import Change, Dated
from auditd.verdicts.remedy import remedy


class Consequence(msgspec.Struct, frozen=True, kw_only=True):
    """What a finding costs, as the evidence says: `loss` and effective runs lost in the cells affected."""

    loss: float | None = None
    n_lost: float | None = None
    n_cells: int = 1
    n_levels: int = 1


def caution(
    finding: Finding,
    plan: Plan,
    *,
    number: int,
    grade: Grade,
    raised_at: datetime,
    consequence: Consequence | None = None,
    dated: Dated | None = None,
    changes: Sequence[Change] = (),
) -> Caution:
    """Return the warning `W<number>` for a finding that leads its group, with sentence, cause and remedy.

    A finding that no longer holds becomes a warning withdrawn. `grade` is the one that `GradeHold` shows.
    """
    known = consequence or Consequence()
    cause = likely_cause(finding, changes) if finding.holds else None
    sentence = message(
        finding,
        dated=dated,
        cause=cause,
        confidence=plan.campaign.confidence,
    )
    advice = remedy(
        finding, plan, n_lost=known.n_lost, n_cells=known.n_cells, n_levels=known.n_levels, cause=cause
    )
    return Caution(
        id=f"W{number}",
        finding=msgspec.structs.replace(finding, message=sentence),
        grade=grade,
        state="standing" if finding.holds else "withdrawn",
        raised_at=raised_at,
        evidence_loss=known.loss,
        remedy=advice,
    )
