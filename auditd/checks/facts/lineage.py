"""Runs that continue others, and chains of restarts that are not whole."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import ClassVar

from auditd.checks.facts.ancestry import Ancestry
from auditd.checks.facts.condition import Condition, counted, next_told
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run

MIN_SHARE = 0.05
"""Share of the completed runs that continue another completed run, from which it is told (convention)."""
MIN_N_CONTINUED = 5
"""Such runs from which it is told; fewer cannot shift a mean."""


class LineageFact(Quiet):
    """Find restart chains whose runs count more than once, cycles, and parents that never landed.

    Exact. A run that continues one which did not complete is a restart and no second sample: it is not
    counted. A parent is missing when the child has got its place in the order and the parent has not
    landed; the finding is withdrawn when it lands.
    """

    kind: ClassVar[Kind] = "lineage"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._asked = plan.record.parent is not None
        self._ancestry = Ancestry()
        self._landed: dict[str, int] = {}  # run -> completed runs in its chain, itself included
        self._n_completed = 0
        self._waiting: dict[str, list[str]] = {}  # parent that has not landed -> children
        self._depth = 0
        self._first = ""  # the run at which continued runs were told first
        self._n_continued = 0
        self._n_next = 0
        self._cycles: Condition | None = None
        self._missing: Condition | None = None
        self._absent: dict[str, int] = {}  # missing parent -> children placed without it

    def arrived(self, run: Run, _arrival: int) -> Iterable[Finding]:
        """Link the run to its parent."""
        if not self._asked:
            return ()
        self._n_completed += run.completed
        self._landed[run.id] = int(run.completed)
        if run.id in self._absent and self._missing is not None:
            for _ in range(self._absent.pop(run.id)):
                self._missing.unseen()
        if run.parent is None:
            return self._adopt(run.id) if run.id in self._waiting else ()
        return self._linked(run, run.parent)

    def placed(self, run: Run, _position: int) -> Iterable[Finding]:
        """Ask whether the parent of a run that has its place has landed."""
        if run.parent is None or not self._asked or run.parent in self._landed:
            return ()
        self._absent[run.parent] = self._absent.get(run.parent, 0) + 1
        if self._missing is None:
            self._missing = Condition("lineage:missing", run.id)
        return (self._missing_finding(run.parent),) if self._missing.seen() else ()

    def standing(self) -> Iterator[Finding]:
        """Tell of parents that have landed since they were missed."""
        if self._missing is not None and self._missing.changed:
            yield self._missing_finding(next(iter(self._absent), ""))

    def _linked(self, run: Run, parent: str) -> list[Finding]:
        self._ancestry.link(run.id, parent)
        if self._ancestry.in_cycle(run.id):
            if self._cycles is None:
                self._cycles = Condition("lineage:cycle", run.id)
            return [self._cycle_finding()] if self._cycles.seen() else []
        if parent not in self._landed:
            self._waiting.setdefault(parent, []).append(run.id)
            return self._adopt(run.id) if run.id in self._waiting else []
        self._landed[run.id] += self._landed[parent]
        found = self._counted_again(run.id) if run.completed and self._landed[run.id] > 1 else []
        return found + (self._adopt(run.id) if run.id in self._waiting else [])

    def _adopt(self, parent: str) -> list[Finding]:
        """Pass a chain's completed runs on to children that landed before their parent."""
        found: list[Finding] = []
        todo = [parent]
        while todo:
            at = todo.pop()
            for child in self._waiting.pop(at, ()):
                completed = self._landed[child] > 0
                self._landed[child] += self._landed[at]
                if completed and self._landed[at] > 0:
                    found += self._counted_again(child)
                todo.append(child)
        return found

    def _counted_again(self, run: str) -> list[Finding]:
        self._n_continued += 1
        self._depth = max(self._depth, self._landed[run] - 1)
        if self._n_continued < max(MIN_N_CONTINUED, MIN_SHARE * self._n_completed) and not self._first:
            return []
        self._first = self._first or run
        if self._n_continued < self._n_next:
            return []
        self._n_next = next_told(self._n_continued)
        return [self._continued_finding()]

    def _continued_finding(self) -> Finding:
        share = self._n_continued / max(1, self._n_completed)
        continuing = counted(self._n_continued, "completed run continues", "completed runs continue")
        message = (
            f"{continuing} another completed run ({share:.0%} of all, chains of up to {self._depth + 1}): "
            "they share what they inherited"
        )
        return Finding(
            key="lineage:continued",
            kind="lineage",
            message=message,
            run=self._first,
            n=self._n_completed,
            share=share,
            n_again=self._n_continued,
        )

    def _cycle_finding(self) -> Finding:
        condition = self._cycles or Condition("lineage:cycle", None)
        message = (
            f"{condition.run} is, by the parents stated, its own ancestor; "
            f"{counted(condition.n, 'such cycle')}"
        )
        return Finding(key="lineage:cycle", kind="lineage", message=message, run=condition.run, n=condition.n)

    def _missing_finding(self, parent: str) -> Finding:
        condition = self._missing or Condition("lineage:missing", None)
        condition.changed = False
        n = condition.n
        message = (
            f"{counted(n, 'run names a parent', 'runs name parents')} that never landed, first "
            f"{condition.run} ({parent})"
        )
        if not n:
            message = "every parent that runs name has landed by now"
        return Finding(
            key="lineage:missing", kind="lineage", message=message, run=condition.run, n=n, holds=n > 0
        )
