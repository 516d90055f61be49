"""The operator's word: answers to warnings and amendments of the plan, applied from a stored position on."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

from sqlalchemy import Connection, select, update

from auditd.checks.facts.plan import plan_finding
from auditd.errors import BadInput, PlanError
from auditd.pipeline.campaign import Campaign, new_key, open_for_replies, plan_difference, text_to_keep
from auditd.pipeline.raising import SEQUENTIAL, Raiser
from auditd.plan import Plan
from auditd.plan_reading import parse_plan
from auditd.records import Caution, Finding
from auditd.series.load import nuisance_levels
from auditd.store.answers import Action, apply_from, save_answer, stored_answers
from auditd.store.cautions import caution_number, stored_cautions
from auditd.store.clock import now_us, rfc3339
from auditd.store.plans import plan_versions, save_epoch, save_plan_version
from auditd.store.runs import count_runs
from auditd.store.tables import answers, cautions, runs

N_LEVELS_NAMED = 12
"""Levels that a message names at most."""


def reply(plan_path: Path, name: str, reason: str, action: Action, scope: dict[str, str]) -> None:
    """Append an answer to a warning; it applies from the next run to be placed.

    Raises
    ------
    BadInput
        There is no such warning, the reason is empty, the scope names what no run has, or the action does
        not fit the warning. Nothing is kept then.
    """
    campaign = open_for_replies(plan_path)
    if not reason.strip():
        raise BadInput("an answer needs a reason; it is kept for ever and stands in the report")
    number = caution_number(name)
    with campaign.engine.begin() as connection:
        found = [] if number is None else stored_cautions(connection, cautions.c.number == number)
        if not found or number is None:
            raise BadInput(f"there is no warning {name!r}; `runaudit warnings` lists them")
        _check_action(found[0], action, scope)
        scope = _checked_scope(connection, campaign.plan, scope)
        save_answer(
            connection,
            caution=number,
            answered_us=now_us(),
            reason=reason,
            action=action,
            scope=scope or _own_scope(found[0].finding, action, campaign.plan),
        )
        connection.execute(
            update(cautions)
            .where(cautions.c.number == number, cautions.c.state == "standing")
            .values(state="answered", changed_us=now_us())
        )


def _own_scope(finding: Finding, action: Action, plan: Plan) -> dict[str, str]:
    """Return the scope that a warning itself names: its level, for what is absorbed."""
    if action == "absorb" and finding.along in plan.nuisance and finding.level is not None:
        return {finding.along: finding.level}
    return {}


def _check_action(one: Caution, action: Action, scope: dict[str, str]) -> None:
    """Refuse an action that does not fit the warning."""
    if action == "set-aside" and not scope:
        raise BadInput("--set-aside needs what is set aside: a level such as host=n3, or --from and --to")
    if action == "absorb" and one.finding.kind not in SEQUENTIAL:
        raise BadInput(
            f"--absorb takes an effect into the baseline; {one.id} is a {one.finding.kind}, which has none: "
            "answer it with a reason alone, or set runs aside"
        )


def _checked_scope(connection: Connection, plan: Plan, scope: dict[str, str]) -> dict[str, str]:
    """Return a scope whose levels and bounds runs have; times in UTC."""
    checked = {}
    for name, value in scope.items():
        if name in {"from", "to"}:
            checked[name] = _bound(connection, name, value)
            continue
        if name not in plan.nuisance:
            known = ", ".join(plan.nuisance) or "none"
            raise BadInput(f"{name!r} is no nuisance of the plan; known: {known}")
        levels = nuisance_levels(connection, name)
        if value not in levels:
            more = ", ..." if len(levels) > N_LEVELS_NAMED else ""
            raise BadInput(
                f"no run has {name}={value}; levels: {', '.join(levels[:N_LEVELS_NAMED]) or 'none'}{more}"
            )
        checked[name] = value
    return checked


def _bound(connection: Connection, name: str, value: str) -> str:
    """Return a run that has its place, or a time as RFC 3339 in UTC (its zone where none is stated)."""
    found = connection.execute(select(runs.c.position).where(runs.c.id == value)).first()
    if found is not None:
        if found.position is None:
            raise BadInput(f"--{name}: run {value!r} came late or waits, so it has no place; give a time")
        return value
    try:
        at = datetime.fromisoformat(value)
    except ValueError:
        raise BadInput(
            f"--{name}: {value!r} is neither a run nor a time; write a run's id, or a time such as "
            "2027-03-01T12:00:00Z"
        ) from None
    return str(rfc3339(at if at.tzinfo is not None else at.replace(tzinfo=UTC)))


def apply_answers(connection: Connection, plan: Plan, position: int, *, only_ask: bool = False) -> bool:
    """Put answers into force from a position on; return whether the audit has to be opened again."""
    new = stored_answers(connection, answers.c.from_position.is_(None))
    if only_ask or not new:
        return bool(new)
    again = False
    version = plan_versions(connection)[-1].version
    for answer in new:
        apply_from(connection, answer.row, position)
        if answer.action in {"restart", "absorb"}:
            save_epoch(
                connection,
                opened_us=now_us(),
                from_position=position,
                plan_version=version,
                key=new_key(),
                reason=f"W{answer.caution} {answer.action}: {answer.reason}",
                scope={name: level for name, level in answer.scope.items() if name in plan.nuisance},
            )
        again = again or answer.action != "noted"
    return again


def amend(plan_path: Path, reason: str) -> list[str]:
    """Take a changed plan into use as a new version and epoch; return what differs.

    Raises
    ------
    PlanError
        There is nothing to amend, or the change contradicts the runs that are stored.
    BadInput
        The reason is empty.
    """
    campaign = open_for_replies(plan_path)
    if not reason.strip():
        raise BadInput("an amendment needs a reason; it is kept for ever and stands in the report")
    with campaign.engine.begin() as connection:
        versions = plan_versions(connection)
        if not versions:
            raise PlanError(
                "no run has been taken under a plan yet: change the plan freely, nothing is to be amended"
            )
        old = parse_plan(versions[-1].text, campaign.plan.path)
        changes = plan_difference(old, campaign.plan)
        if not changes:
            raise PlanError("the plan's audited fields are as they were; there is nothing to amend")
        _refuse_contradictions(connection, old, campaign)
        position = count_runs(connection).next_position
        version = save_plan_version(
            connection,
            digest=campaign.plan.audited_hash,
            text=text_to_keep(campaign.plan),
            reason=reason,
            taken_us=now_us(),
            from_position=position,
        )
        save_epoch(
            connection,
            opened_us=now_us(),
            from_position=position,
            plan_version=version,
            key=new_key(),
            reason=f"plan amended: {reason}",
            scope={},
        )
        last = connection.execute(select(runs.c.id).where(runs.c.position == position - 1)).scalar()
        finding = plan_finding(
            version=version,
            changed=[change.split(":", 1)[0] for change in changes],
            reason=reason,
            position=position,
            run=last,
        )
        Raiser(campaign.plan, connection).raise_facts(connection, [finding])
    return changes


def _refuse_contradictions(connection: Connection, old: Plan, campaign: Campaign) -> None:
    """Refuse amendments under which the stored runs would have no cell or no place."""
    new = campaign.plan
    if count_runs(connection).n == 0:
        return
    for name in new.factors:
        if name not in old.factors:
            raise PlanError(
                f"factors.{name} is new, but the stored runs do not state it; "
                "begin a new campaign with a store of its own, or leave the factor out"
            )
    if (old.order.by, old.record.sequence, old.record.started) != (
        new.order.by,
        new.record.sequence,
        new.record.started,
    ):
        raise PlanError("the order of runs that have their places cannot be changed; begin a new campaign")
