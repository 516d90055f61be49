"""The warning that nothing lands any more: no news is not good news."""

from __future__ import annotations

from datetime import UTC, datetime

from auditd.checks.facts.silence import silence_finding
from auditd.pipeline.session import Session
from auditd.plan import Plan, duration_s


class SilenceWatch:
    """Raises `silence` when no run has landed for so long, and withdraws it when one has.

    Parameters
    ----------
    plan : with or without a `[silence]` section.
    now : POSIX seconds; silence is counted from here when no run has landed since.
    """

    def __init__(self, plan: Plan, now: float) -> None:
        self._after_s = None if plan.silence is None else duration_s(plan.silence.after, "silence.after")
        self._began = now
        self._since: float | None = None

    def look(self, session: Session, now: float) -> None:
        """Compare the last landing with the clock."""
        if self._after_s is None:
            return
        last = max(session.landed_at, self._began)
        silent = now - last > self._after_s
        if silent == (self._since is not None):
            return
        since = last if silent else self._since
        self._since = last if silent else None
        if since is None:
            return
        at = datetime.fromtimestamp(since, UTC)
        session.raise_outside([silence_finding(at, after_s=self._after_s, holds=silent)])
