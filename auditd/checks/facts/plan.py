"""A plan that was changed after the first run."""

from __future__ import annotations

from auditd.checks.facts.condition import counted
from auditd.records import Finding

N_LISTED = 4
"""Changed fields that a message names."""


def plan_finding(*, version: int, changed: list[str], reason: str, position: int, run: str | None) -> Finding:
    """Return the finding that a changed plan was taken into use.

    Parameters
    ----------
    version : the new version, counted from 1 for the first plan.
    changed : names of the audited fields that differ, such as `responses.error.margin`.
    reason : what the operator gave to `amend`.
    position : runs audited under the earlier versions.
    run : the last run audited under them.
    """
    listed = ", ".join(changed[:N_LISTED]) + (", …" if len(changed) > N_LISTED else "")
    message = (
        f"version {version} of the plan is in use after {counted(position, 'run')}: {listed} changed "
        f"({reason}); what is decided by the runs seen before is exploratory from here on"
    )
    return Finding(
        key=f"plan:{version}",
        kind="plan",
        message=message,
        run=run,
        index=position,
        n=position,
        since=position,
    )
