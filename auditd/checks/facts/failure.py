"""Failures that are concentrated in a cell, on a level of a nuisance, or in a stretch."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import ClassVar

from auditd.checks.facts.condition import counted, next_told
from auditd.checks.facts.counting import threshold_log_e
from auditd.checks.facts.failing_e import FailingLevelsE, FailingStretchE, Outcomes
from auditd.checks.facts.labels import CellIndex, LevelIndex
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run


class FailureFact(Quiet):
    """Find runs that fail more in one cell, on one level of a nuisance, or in one stretch of the order.

    E-processes against one exchangeable sequence of failures (`failing_e.py`): one for the cells, one for
    each nuisance, one for the order. They share the counting facts' budget (`counting.py`). A run has
    failed when its status is none of the plan's `completed`; without a status nothing is asked. Runs that
    are late, or have no place in an order, are not counted.
    """

    kind: ClassVar[Kind] = "failure"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._asked = plan.record.status is not None
        self._threshold = threshold_log_e(plan, alarm_budget)
        self._bar = math.exp(self._threshold)
        self._outcomes = Outcomes()
        self._cells = CellIndex()
        self._levels = {name: LevelIndex() for name in plan.nuisance}
        self._by: dict[str, FailingLevelsE] = {name: FailingLevelsE() for name in ("cell", *plan.nuisance)}
        self._stretch = FailingStretchE()
        self._spell = _Spell()
        self._told: dict[str, tuple[str, int, int]] = {}  # raised at run and position; failures to tell again

    def placed(self, run: Run, position: int) -> Iterable[Finding]:
        """Settle the bets on whether the run failed."""
        if not self._asked:
            return ()
        failed, outcomes, bar = not run.completed, self._outcomes, self._bar
        outcomes.take(failed=failed)
        crossed: list[str] = []
        if self._by["cell"].observe(self._cells.number(run.cell), outcomes, failed=failed) >= bar:
            crossed.append("cell")
        for name, index in self._levels.items():
            level = index.number(run.nuisance.get(name))
            if self._by[name].observe(level, outcomes, failed=failed) >= bar:
                crossed.append(name)
        if self._stretch.observe(outcomes, failed=failed) >= bar:
            crossed.append("order")
        self._spell.take(run.id, position, failed=failed, common=outcomes.common)
        return self._raised(run, position, crossed) if crossed or failed else ()

    def _raised(self, run: Run, position: int, crossed: list[str]) -> list[Finding]:
        n_failed = self._outcomes.n_failed
        for name in crossed:
            self._told.setdefault(name, (run.id, position, n_failed))
        due = [name for name, (_, _, n_next) in self._told.items() if n_failed >= n_next]
        found: list[Finding] = []
        for name in due:
            at, index, _ = self._told[name]
            self._told[name] = (at, index, next_told(n_failed))
            found.append(self._finding(name, at, index))
        return found

    def _finding(self, name: str, run: str | None, index: int) -> Finding:
        if name == "order":
            return self._stretch_finding(run, index)
        e = self._by[name]
        level = max(range(len(e.n)), key=lambda j: self._excess(e.failed[j], e.n[j]))
        n, k = e.n[level], e.failed[level]
        labels = self._cells.labels if name == "cell" else self._levels[name].labels
        message = (
            f"{k} of {counted(n, 'run')} {'of cell' if name == 'cell' else f'on {name}'} {labels[level]} "
            f"failed, {self._outcomes.n_failed - k} of {self._outcomes.n - n:,} elsewhere"
        )
        return Finding(
            key=f"failure:{name}",
            kind="failure",
            message=message,
            along=name,
            level=labels[level],
            run=run,
            index=index,
            n=self._outcomes.n,
            log_e=e.segments.log_e(),
            threshold=self._threshold,
            cells=(labels[level],) if name == "cell" else (),
            share=k / max(1, self._outcomes.n_failed),
            n_again=k,
        )

    def _stretch_finding(self, run: str | None, index: int) -> Finding:
        spell = self._spell
        message = (
            f"{spell.n_failed} of {counted(spell.n, 'run')} from {spell.first} to {spell.last} failed, "
            f"{self._outcomes.n_failed - spell.n_failed} of {self._outcomes.n - spell.n:,} before and "
            "after"
        )
        return Finding(
            key="failure:order",
            kind="failure",
            message=message,
            along="order",
            run=run,
            index=index,
            n=self._outcomes.n,
            since=spell.since,
            log_e=self._stretch.segments.log_e(),
            threshold=self._threshold,
            share=spell.n_failed / max(1, self._outcomes.n_failed),
            n_again=spell.n_failed,
        )

    def _excess(self, k: int, n: int) -> float:
        """Return the log likelihood that a level gains by a higher rate of its own."""
        rest_n, rest_k = self._outcomes.n - n, self._outcomes.n_failed - k
        if not n or not rest_n or k * rest_n <= rest_k * n:
            return 0.0
        return (
            _log_likelihood(k, n)
            + _log_likelihood(rest_k, rest_n)
            - _log_likelihood(self._outcomes.n_failed, self._outcomes.n)
        )


def _log_likelihood(k: int, n: int) -> float:
    """Return the largest log likelihood of k failures among n runs at one rate."""
    return sum(part * math.log(part / n) for part in (k, n - k) if part)


class _Spell:
    """The stretch with the most failures beyond twice the common rate: a sum that restarts at 0."""

    def __init__(self) -> None:
        self._sum = 0.0
        self._best = 0.0
        self._start: tuple[str, int] | None = None
        self._n = self._n_failed = 0
        self.first = self.last = ""
        self.since: int | None = None
        self.n = self.n_failed = 0

    def take(self, run: str, position: int, *, failed: bool, common: float) -> None:
        """Enter a run in order."""
        if not failed and self._start is None:
            return
        if self._start is None:
            self._start = (run, position)
            self._sum, self._n, self._n_failed = 0.0, 0, 0
        self._n += 1
        self._n_failed += failed
        self._sum += failed - min(0.5, max(0.02, 2 * common))
        if failed and self._sum > self._best:
            self._best = self._sum
            self.first, self.since = self._start
            self.last, self.n, self.n_failed = run, self._n, self._n_failed
        if self._sum <= 0:
            self._start = None
