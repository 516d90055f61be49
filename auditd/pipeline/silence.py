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
    """

    def __init__(self, plan: Plan) -> None:
        self._after_s = None if plan.silence is None else duration_s(plan.silence.after, "silence.after")
        self._n_told: int | None = None
        self._n_heard = -1

    def look(self, session: Session, now: float) -> None:
        """Compare the last landing with the clock; `now` is POSIX seconds."""
        if self._after_s is None:
            return
        n = session.n_arrived
        if n != self._n_heard:
            if self._n_heard >= 0 or now - session.landed_at < self._after_s:
                session.withdraw("silence", "runs land again")
            self._n_heard = n
        if now - session.landed_at > self._after_s and self._n_told != n:
            self._n_told = n
            finding = silence_finding(
                last_landed=datetime.fromtimestamp(session.landed_at, UTC),
                now=datetime.fromtimestamp(now, UTC),
                after_s=self._after_s,
                last_run=session.last_run,
                n=n,
            )
            session.raise_outside([finding])
