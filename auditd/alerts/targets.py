"""Where alerts go: the plan's targets under names that the outbox keeps."""

from __future__ import annotations

import os
import re
import shutil
from collections.abc import Mapping
from pathlib import Path

from auditd.alerts.address import read_address
from auditd.errors import PlanError
from auditd.plan import Alert, Plan
from auditd.records import Grade

_NAME = re.compile(r"(?P<to>command|url):(?P<number>\d{1,6})")


def target_name(alert: Alert, number: int) -> str:
    """Return a target's name: how it is reached and its place among the plan's alerts, from 0."""
    return f"{alert.to}:{number}"


def targets_for(plan: Plan, grade: Grade) -> tuple[str, ...]:
    """Return the names of the targets that an alert of a grade goes to."""
    return tuple(
        target_name(alert, number) for number, alert in enumerate(plan.alerts) if grade in alert.grades
    )


def alert_named(plan: Plan, target: str) -> Alert | None:
    """Return the plan's alert of a name, or None where the plan has it no longer."""
    match = _NAME.fullmatch(target)
    if match is None or int(match["number"]) >= len(plan.alerts):
        return None
    alert = plan.alerts[int(match["number"])]
    return alert if alert.to == match["to"] else None


def program_of(alert: Alert, folder: Path) -> str:
    """Return a command's program: one with a slash starts from the plan's folder, a bare name from PATH."""
    program = alert.argv[0]
    return str(folder / program) if "/" in program else program


def target_complaints(plan: Plan, environ: Mapping[str, str] = os.environ) -> tuple[str, ...]:
    """Return what would make a delivery fail already now, for the operator to mend; secrets stay unsaid."""
    found = []
    for number, alert in enumerate(plan.alerts):
        where = f"alerts[{number}]"
        if alert.to == "command":
            program = program_of(alert, plan.folder)
            if shutil.which(program, path=environ.get("PATH")) is None:
                found.append(f"{where}: {program} is not an executable file")
            continue
        try:
            read_address(alert, plan.folder, environ)
        except PlanError as error:
            found.append(f"{where}: {error}")
    return tuple(found)
