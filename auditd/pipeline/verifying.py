"""`store verify`: pages and counts, and the audit made anew against the warnings that were raised."""

from __future__ import annotations

import math
from pathlib import Path

from sqlalchemy import Connection

from auditd.pipeline.auditing import replayed_alarms
from auditd.pipeline.raising import key_of
from auditd.plan import Plan
from auditd.plan_reading import load_plan
from auditd.store.cautions import stored_cautions
from auditd.store.engine import open_engine
from auditd.store.place import store_url
from auditd.store.plans import plan_versions, stored_epochs
from auditd.store.verify import verify_store

TOLERANCE = 1e-6
"""Largest difference of a recomputed log e-value from the stored one."""


def verify(plan_path: Path) -> list[str]:
    """Return what is wrong with the store, in sentences; empty where nothing is."""
    plan = load_plan(plan_path)
    url = store_url(plan)
    complaints = list(verify_store(url))
    if complaints:
        return complaints
    engine = open_engine(url, read_only=True)
    with engine.connect() as connection:
        if plan_versions(connection)[-1].hash != plan.audited_hash:
            return ["the plan differs from the one in use; the audit cannot be made anew under it"]
        return _compare_alarms(connection, plan)


def _compare_alarms(connection: Connection, plan: Plan) -> list[str]:
    raised = {
        one.finding.key: one.finding
        for one in stored_cautions(connection)
        if one.finding.key.startswith("audit:")
    }
    complaints = []
    epoch = stored_epochs(connection)[-1].epoch
    anew = {}
    for alarm in replayed_alarms(plan, connection):
        key = key_of(alarm, *alarm.alarm.key)
        anew[key] = alarm
        stored = raised.get(key)
        if stored is None or stored.kind != alarm.alarm.kind or stored.log_e is None:
            continue
        if stored.index != alarm.index or not math.isclose(
            stored.log_e, alarm.alarm.log_e, abs_tol=TOLERANCE
        ):
            complaints.append(
                f"{key}: raised at position {stored.index} with log e {stored.log_e:.6f}, "
                f"but the stored runs give position {alarm.index} with {alarm.alarm.log_e:.6f}"
            )
    complaints += [
        f"{key}: raised, but the stored runs do not give it"
        for key in raised
        if key.startswith(f"audit:{epoch}:") and key not in anew
    ]
    return complaints
