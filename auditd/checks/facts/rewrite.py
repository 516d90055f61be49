"""Records that changed after they had been taken."""

from __future__ import annotations

from collections.abc import Iterable
from typing import ClassVar

from auditd.checks.facts.condition import Condition, Episodes, counted
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Refusal, Run


class RewriteFact(Quiet):
    """Find records that came again under one id with other content, and files that were rewritten.

    Exact: a digest of the record is compared. The record first taken stays in the audit; the later one is
    kept as a refusal. Rewrites that follow each other closely are one condition.
    """

    kind: ClassVar[Kind] = "rewrite"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._arrival = 0
        self._episodes = Episodes()
        self._conditions: dict[str, tuple[Condition, str]] = {}

    def arrived(self, _run: Run, arrival: int) -> Iterable[Finding]:
        """Note how far the arrivals have gone."""
        self._arrival = arrival
        return ()

    def refused(self, refusal: Refusal) -> Iterable[Finding]:
        """Take a refusal of the kind `rewrite`."""
        if refusal.kind != "rewrite":
            return ()
        key = f"rewrite:{self._episodes.number(self._arrival)}"
        if key not in self._conditions:
            self._conditions[key] = (Condition(key, refusal.id), refusal.path)
        condition, path = self._conditions[key]
        return (_finding(condition, path),) if condition.seen() else ()


def _finding(condition: Condition, path: str) -> Finding:
    what = f"run {condition.run}" if condition.run else "a record"
    more = f"; {counted(condition.n, 'record')} in all" if condition.n > 1 else ""
    message = f"{what} in {path} changed after it had been taken; the audit keeps what it saw first{more}"
    return Finding(key=condition.key, kind="rewrite", message=message, run=condition.run, n=condition.n)
