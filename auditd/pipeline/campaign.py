"""A campaign opened: its plan, its store, and the plan version and epoch that are in force."""

from __future__ import annotations

import os
import re
import secrets
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import Connection, Engine
from sqlalchemy.engine import URL

from auditd.errors import PlanChanged, PlanError
from auditd.plan import Plan
from auditd.plan_reading import load_plan, parse_plan
from auditd.store.clock import now_us
from auditd.store.engine import open_engine
from auditd.store.migrate import open_or_make
from auditd.store.place import store_url
from auditd.store.plans import Epoch, PlanVersion, plan_versions, save_epoch, save_plan_version, stored_epochs
from auditd.store.runs import count_runs

_PASSWORD = re.compile(r"(?P<before>[a-z0-9+]+://[^\s/:@\"']*:)[^\s/@\"']+@", re.IGNORECASE)
PLAN_LOCK = 0x706C616E
"""Key of the advisory lock under which a PostgreSQL store's plan is settled."""
KEY_BYTES = 32
"""Length of the key under which an epoch's ties are broken."""


@dataclass(frozen=True, kw_only=True)
class Campaign:
    """A plan and the store of its runs."""

    plan: Plan
    url: URL
    engine: Engine


def find_plan(stated: str | None) -> Path:
    """Return the plan's path: as stated, or `plan.toml` here or in a folder above.

    Raises
    ------
    PlanError
        There is none.
    """
    if stated is not None:
        path = Path(stated)
        if path.is_file():
            return path
        raise PlanError(
            f"no plan at {stated}; name a TOML file with --plan, or write one with `runaudit draft`"
        )
    here = Path.cwd()
    for folder in (here, *here.parents):
        if (folder / "plan.toml").is_file():
            return folder / "plan.toml"
    raise PlanError(
        "no plan.toml here or in a folder above; name one with --plan, or write one with `runaudit draft`"
    )


def open_for_queries(plan_path: Path) -> Campaign:
    """Open a campaign to read it; the store must exist."""
    plan = load_plan(plan_path)
    url = store_url(plan)
    return Campaign(plan=plan, url=url, engine=open_engine(url, read_only=True))


def open_for_replies(plan_path: Path) -> Campaign:
    """Open a campaign to append an answer, a look or an amendment in a short transaction."""
    plan = load_plan(plan_path)
    url = store_url(plan)
    return Campaign(plan=plan, url=url, engine=open_engine(url))


def open_for_taking(plan_path: Path) -> Campaign:
    """Open a campaign to take runs; the store is made or migrated where needed."""
    plan = load_plan(plan_path)
    url = store_url(plan)
    return Campaign(plan=plan, url=url, engine=open_or_make(url))


def settle_plan(campaign: Campaign) -> Epoch:
    """Take the plan into use before the first run, or check that it is the one in use; return the epoch.

    Raises
    ------
    PlanChanged
        What is audited differs from the plan in use; `runaudit amend` says why it may.
    """
    with campaign.engine.begin() as connection:
        _one_at_a_time(connection)
        versions = plan_versions(connection)
        if not versions:
            _take_first(connection, campaign.plan)
        elif versions[-1].hash != campaign.plan.audited_hash:
            _refuse_or_replace(connection, campaign.plan, versions)
        return stored_epochs(connection)[-1]


def _one_at_a_time(connection: Connection) -> None:
    """Let starters of a server's store settle the plan one after the other; SQLite does so by itself."""
    if connection.dialect.name == "postgresql":
        connection.exec_driver_sql(f"SELECT pg_advisory_xact_lock({PLAN_LOCK})")


def plan_in_use(connection: Connection, fallback: Plan) -> Plan:
    """Return the plan under which runs are audited now: the stored one, at the path of the given one."""
    versions = plan_versions(connection)
    return parse_plan(versions[-1].text, fallback.path) if versions else fallback


def text_to_keep(plan: Plan) -> str:
    """Return the plan's text as it is stored and shown: without the password of a store's address."""
    return _PASSWORD.sub(r"\g<before>***@", plan.text)


def plan_difference(old: Plan, new: Plan) -> list[str]:
    """Return what differs in the audited fields, as `key: old -> new`."""
    before, after = _flat(old.audited_fields()), _flat(new.audited_fields())
    return [
        f"{key}: {before.get(key, '(none)')} -> {after.get(key, '(none)')}"
        for key in sorted({*before, *after})
        if before.get(key) != after.get(key)
    ]


def _take_first(connection: Connection, plan: Plan) -> None:
    version = save_plan_version(
        connection,
        digest=plan.audited_hash,
        text=text_to_keep(plan),
        reason=None,
        taken_us=now_us(),
        from_position=0,
    )
    save_epoch(
        connection,
        opened_us=now_us(),
        from_position=0,
        plan_version=version,
        key=new_key(),
        reason="the first run",
        scope={},
    )


def new_key() -> bytes:
    """Return a key for an epoch's randomisers; `RUNAUDIT_KEY` (hexadecimal) makes a campaign repeatable."""
    stated = os.environ.get("RUNAUDIT_KEY")
    if stated is None:
        return secrets.token_bytes(KEY_BYTES)
    try:
        return bytes.fromhex(stated)[:KEY_BYTES]
    except ValueError as error:
        raise PlanError("RUNAUDIT_KEY is not hexadecimal; write an even number of digits 0-9a-f") from error


def _refuse_or_replace(connection: Connection, plan: Plan, versions: list[PlanVersion]) -> None:
    old = parse_plan(versions[-1].text, plan.path)
    if count_runs(connection).n == 0:
        save_plan_version(
            connection,
            digest=plan.audited_hash,
            text=text_to_keep(plan),
            reason="changed before the first run",
            taken_us=now_us(),
            from_position=0,
        )
        return
    changes = "; ".join(plan_difference(old, plan)[:5])
    raise PlanChanged(
        f"the plan differs from the one in use ({changes}); "
        'take it into use with `runaudit amend "reason"`, or put the plan back'
    )


def _flat(value: object, where: str = "") -> dict[str, str]:
    if isinstance(value, dict):
        parts = [_flat(inner, f"{where}.{key}".lstrip(".")) for key, inner in value.items()]
        return {key: text for part in parts for key, text in part.items()}
    return {where: str(value)}
