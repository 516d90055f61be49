"""Findings to warnings and alerts: one cause is one warning, and one condition alarms once."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from datetime import UTC, datetime

import msgspec
from sqlalchemy import Connection

from auditd.alerts.targets import targets_for
from auditd.pipeline.asking import caution_document
from auditd.pipeline.auditing import Audit
from auditd.pipeline.consequences import consequence_of, grade_of
from auditd.pipeline.dates import changes, dated
from auditd.pipeline.effects import effect_of
from auditd.pipeline.redating import not_before_its_level, seen_anew
from auditd.pipeline.tracks import Raised
from auditd.plan import Plan
from auditd.records import GRADES, Caution, Finding, Listed
from auditd.series.load import load_table
from auditd.series.table import RunTable
from auditd.store.cautions import caution_number, save_caution, stored_cautions, update_caution
from auditd.store.clock import now_us, to_us
from auditd.store.outbox import put_letter
from auditd.store.plans import stored_epochs
from auditd.verdicts.causes import why_explained
from auditd.verdicts.cautions import caution
from auditd.verdicts.grades import GradeHold

SEQUENTIAL = ("serial", "drift", "batch", "spread", "clock", "lineage")
N_DIGITS_LOG_E = 9
"""Decimals of a log e-value that are kept: any split of the runs into blocks agrees to so many."""
N_REGRADE = 30
"""Runs after an alarm from which its effect is estimated anew: at the alarm it is inflated."""


class Raiser:
    """The warnings of a campaign, as far as raising new ones needs them.

    Parameters
    ----------
    plan, connection : the plan in use and its store.
    """

    def __init__(self, plan: Plan, connection: Connection) -> None:
        self._plan = plan
        self._cautions = {one.id: one for one in stored_cautions(connection)}
        self._of_key = {one.finding.key: one.id for one in self._cautions.values()}
        for one in self._cautions.values():
            for key in _listed_keys(one.finding):
                self._of_key.setdefault(key, one.id)
        self._holds: dict[str, GradeHold] = {}
        self._grown: dict[str, Finding] = {}

    def raise_facts(self, connection: Connection, findings: Iterable[Finding]) -> int:
        """Raise facts that are new, and count them.

        Those that have grown, or hold no longer, are kept for `regrade`: a count that grows with every run
        must not cost a look at the whole campaign each time.
        """
        table: RunTable | None = None
        n_new = 0
        for finding in findings:
            known = self._of_key.get(finding.key)
            if known is not None and self._cautions[known].finding.key != finding.key:
                continue
            if known is None and not finding.holds:
                continue
            if known is not None:
                self._grown[finding.key] = finding
                continue
            if table is None:
                table = load_table(connection, self._plan)
            n_new += self._raise(connection, finding, table)
        return n_new

    def raise_missing(self, connection: Connection, findings: Iterable[Finding]) -> int:
        """Raise what the stored runs show and no warning tells: the process ended before it was raised.

        Facts that have warnings are renewed at the next weighing, as far as they grew since the last one.
        """
        return self.raise_facts(connection, findings)

    def raise_alarms(self, connection: Connection, alarms: Sequence[Raised]) -> int:
        """Raise the sequential audit's alarms; count the warnings that are new."""
        if not alarms:
            return 0
        table = load_table(connection, self._plan)
        n_new = 0
        for raised in alarms:
            finding = finding_of(raised, table, self._plan)
            under = self._leader(raised)
            if under is not None:
                self._list_under(connection, under, finding)
            elif raised.alarm.replaces is not None and self._take_over(connection, raised, finding):
                continue
            else:
                n_new += self._raise(connection, finding, table)
        return n_new

    def withdraw(self, connection: Connection, kind: str, message: str) -> None:
        """Withdraw the standing warnings of a kind, saying why."""
        for one in list(self._cautions.values()):
            if one.finding.kind == kind and one.state == "standing":
                finding = msgspec.structs.replace(one.finding, holds=False, message=message)
                self._store(connection, msgspec.structs.replace(one, finding=finding, state="withdrawn"))

    def regrade(self, connection: Connection, table: RunTable, audit: Audit) -> None:
        """Store facts that have grown; name and estimate dependences anew from runs since their alarms."""
        for one in stored_cautions(connection):
            self._cautions[one.id] = one
        for finding in self._grown.values():
            self._renew(connection, self._cautions[self._of_key[finding.key]], finding, table)
        self._grown.clear()
        for one in list(self._cautions.values()):
            if one.state != "standing" or one.finding.kind not in SEQUENTIAL or one.finding.index is None:
                continue
            n_after = int((table.positions > one.finding.index).sum())
            if n_after >= N_REGRADE:
                self._regrade_one(connection, self._named_anew(one, audit, table), table)

    def _named_anew(self, one: Caution, audit: Audit, table: RunTable) -> Caution:
        """Let the family that has gathered the most evidence by now lead, among those of one cause.

        At the first alarm a step on a host may look like resemblance of neighbours; later runs tell. The
        warning keeps its id and key, and the former leader is listed.
        """
        best: tuple[tuple[bool, float], Raised] | None = None
        for track, raised in audit.raised_so_far():
            same = self._of_key.get(key_of(raised, *raised.alarm.key)) == one.id
            if not same or raised.response != one.finding.response:
                continue
            # a cycle that the audit let take over has shown that it explains what the leader follows
            rank = (raised.alarm.replaces is not None, track.auditor.log_e[raised.alarm.key])
            if best is None or rank > best[0]:
                best = (rank, raised)
        if best is None or best[1].alarm.key == (one.finding.kind, one.finding.along):
            return one
        found = finding_of(best[1], table, self._plan)
        explains = _distinct((_listed(one.finding), *one.finding.explains, *found.explains))
        kept = tuple(other for other in explains if (other.kind, other.along) != best[1].alarm.key)
        return msgspec.structs.replace(
            one, finding=msgspec.structs.replace(found, key=one.finding.key, explains=kept)
        )

    def _regrade_one(self, connection: Connection, one: Caution, table: RunTable) -> None:
        finding = seen_anew(one.finding, table, self._plan)
        effect = effect_of(finding, table, self._plan)
        finding = msgspec.structs.replace(finding, effect=effect or one.finding.effect, message="")
        consequence, loss_low = consequence_of(finding, table, self._plan)
        hold = self._holds.setdefault(one.id, GradeHold(held=one.grade))
        grade = hold.observe(int(table.positions.max()), grade_of(finding, table, self._plan, loss_low))
        renewed = caution(
            finding,
            self._plan,
            number=caution_number(one.id) or 0,
            grade=grade,
            raised_at=one.raised_at,
            consequence=consequence,
            dated=dated(finding, table),
            changes=changes(table),
        )
        self._store(connection, renewed)
        if GRADES.index(grade) > GRADES.index(one.grade):
            self._alert(connection, renewed)

    def _raise(self, connection: Connection, finding: Finding, table: RunTable) -> int:
        """Raise a finding, or list it under the standing cause that explains it."""
        known_changes = changes(table)
        epoch = stored_epochs(connection)[-1].epoch
        for leader in self._cautions.values():
            if self._may_lead(leader, finding) and why_explained(leader.finding, finding, known_changes):
                self._list_under(connection, leader, finding)
                return 0
        consequence, loss_low = consequence_of(finding, table, self._plan)
        made = caution(
            finding,
            self._plan,
            number=0,
            grade=grade_of(finding, table, self._plan, loss_low),
            raised_at=datetime.now(UTC),
            consequence=consequence,
            dated=dated(finding, table),
            changes=known_changes,
        )
        saved = save_caution(connection, made, epoch=epoch)
        if saved is None:
            return 0
        self._remember(saved)
        self._alert(connection, saved)
        return 1

    def _may_lead(self, leader: Caution, finding: Finding) -> bool:
        """Whether a warning can take in a finding: it stands, and of the same epoch where that matters."""
        if leader.state == "withdrawn":
            return False
        if leader.finding.kind in SEQUENTIAL and finding.kind in SEQUENTIAL:
            return _epoch_of(leader.finding.key) == _epoch_of(finding.key)
        return leader.state == "standing"

    def _leader(self, raised: Raised) -> Caution | None:
        if raised.alarm.under is None:
            return None
        known = self._of_key.get(key_of(raised, *raised.alarm.under))
        return None if known is None else self._cautions[known]

    def _take_over(self, connection: Connection, raised: Raised, finding: Finding) -> bool:
        """List a better name under a standing warning; `regrade` lets it lead once it has the evidence."""
        kind, along = raised.alarm.replaces or ("", "")
        known = self._of_key.get(key_of(raised, kind, along))
        if known is None:
            return False
        self._list_under(connection, self._cautions[known], finding)
        return True

    def _renew(self, connection: Connection, known: Caution, finding: Finding, table: RunTable) -> None:
        """Store a warning's newer finding; withdraw it where it no longer holds."""
        finding = msgspec.structs.replace(
            finding,
            run=known.finding.run if known.finding.kind == finding.kind else finding.run,
            index=known.finding.index if known.finding.kind == finding.kind else finding.index,
            explains=_distinct((*known.finding.explains, *finding.explains)),
        )
        consequence, loss_low = consequence_of(finding, table, self._plan)
        grade = grade_of(finding, table, self._plan, loss_low)
        renewed = caution(
            finding,
            self._plan,
            number=caution_number(known.id) or 0,
            grade=max(grade, known.grade, key=GRADES.index),
            raised_at=known.raised_at,
            consequence=consequence,
            dated=dated(finding, table),
            changes=changes(table),
        )
        if known.state == "answered" and finding.holds:
            renewed = msgspec.structs.replace(renewed, state="answered")
        self._store(connection, renewed)
        if GRADES.index(renewed.grade) > GRADES.index(known.grade) and finding.holds:
            self._alert(connection, renewed)

    def _list_under(self, connection: Connection, leader: Caution, finding: Finding) -> None:
        explains = _distinct((*leader.finding.explains, _listed(finding)))
        self._of_key[finding.key] = leader.id
        renewed = _without_itself(msgspec.structs.replace(leader.finding, explains=explains))
        if renewed.explains != leader.finding.explains:
            self._store(connection, msgspec.structs.replace(leader, finding=renewed))

    def _store(self, connection: Connection, one: Caution) -> None:
        one = msgspec.structs.replace(one, finding=_without_itself(one.finding))
        update_caution(connection, one, changed_us=now_us())
        self._remember(one)

    def _remember(self, one: Caution) -> None:
        self._cautions[one.id] = one
        self._of_key[one.finding.key] = one.id

    def _alert(self, connection: Connection, one: Caution) -> None:
        """Put an alert for every target of the warning's grade into the outbox."""
        for target in targets_for(self._plan, one.grade):
            alert_id = f"{one.id}-{one.grade}-{target}-{to_us(one.raised_at):x}"
            put_letter(
                connection,
                alert_id=alert_id,
                caution=caution_number(one.id) or 0,
                target=target,
                body=caution_document(one) | {"campaign": self._plan.campaign.title, "alert_id": alert_id},
                created_us=now_us(),
            )


def key_of(raised: Raised, kind: str, along: str) -> str:
    """Return the key of a sequential condition: a family of one response, or part of it, in one epoch."""
    return f"audit:{raised.epoch}:{raised.response}:{raised.part}:{kind}:{along}"


def finding_of(raised: Raised, table: RunTable, plan: Plan) -> Finding:
    """Return the finding that an alarm is, with positions of the campaign and an effect."""
    alarm = raised.alarm
    at = table.ids[table.positions == raised.index]
    finding = Finding(
        key=key_of(raised, *alarm.key),
        kind=alarm.kind,  # type: ignore[arg-type] # the audit's kinds are among the records'
        message="",
        along=alarm.along,
        level=alarm.level,
        response=raised.response,
        run=str(at[0]) if len(at) else None,
        index=raised.index,
        n=alarm.n_scored,
        since=raised.since,
        since_low=raised.since_low,
        since_high=raised.since_high,
        log_e=round(alarm.log_e, N_DIGITS_LOG_E),
        threshold=round(alarm.threshold, N_DIGITS_LOG_E),
        explains=tuple(
            Listed(kind=one.kind, along=one.along, level=one.level, log_e=one.log_e) for one in alarm.explains
        ),
    )
    finding = not_before_its_level(finding, table)
    return msgspec.structs.replace(finding, effect=effect_of(finding, table, plan))


def _listed_keys(finding: Finding) -> list[str]:
    """Return the keys of the families that a sequential warning lists: they stay its own after a restart."""
    if not finding.key.startswith("audit:"):
        return []
    series = finding.key.rsplit(":", 2)[0]
    return [f"{series}:{one.kind}:{one.along}" for one in finding.explains if one.kind in SEQUENTIAL]


def _epoch_of(key: str) -> str:
    return key.split(":", 2)[1] if key.startswith("audit:") else ""


def _listed(finding: Finding) -> Listed:
    return Listed(kind=finding.kind, along=finding.along, level=finding.level, log_e=finding.log_e)


def _without_itself(finding: Finding) -> Finding:
    """Return a finding that does not list itself: what led it once may be what leads it again."""
    own = (finding.kind, finding.along, finding.level)
    kept = tuple(one for one in finding.explains if (one.kind, one.along, one.level) != own)
    return msgspec.structs.replace(finding, explains=kept)


def _distinct(listed: Iterable[Listed]) -> tuple[Listed, ...]:
    return tuple({(one.kind, one.along, one.level): one for one in listed}.values())
