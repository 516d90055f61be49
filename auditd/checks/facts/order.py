"""Levels that did not come in random order, and orders that cannot be trusted."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import ClassVar

from auditd.checks.facts.clumping_e import ClumpingE
from auditd.checks.facts.condition import counted, next_told
from auditd.checks.facts.counting import threshold_log_e
from auditd.checks.facts.labels import LevelIndex
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run

MAX_LATE_SHARE = 0.005
"""Share of late runs above which the order is told to be doubtful (the project's own trial: with 1.6 % late
runs let in, independent runs alarmed in 33 to 68 % of campaigns)."""


class _Factor:
    """The order of one factor's levels."""

    def __init__(self) -> None:
        self.levels = LevelIndex()
        self.e = ClumpingE()
        self.first: list[int] = []
        self.last: list[int] = []
        self.n_alike = 0
        self.told: tuple[str, int] | None = None
        self.n_next = 0

    def take(self, level: int, position: int) -> float:
        """Enter a run's level and return the wealth."""
        if level == len(self.first):
            self.first.append(position)
            self.last.append(position)
        elif self.last[level] == position - 1:
            self.n_alike += 1
        self.last[level] = position
        return self.e.observe(level)


class OrderFact(Quiet):
    """Find factors whose levels came clumped: all of A before all of B, or long stretches of one level.

    An e-process for each factor (`clumping_e.py`) against every exchangeable order of its levels; it
    shares the counting facts' budget (`counting.py`) and stands once it has alarmed, since a later random
    part does not undo an earlier sorted one. Balanced and blocked orders do not raise it.
    """

    kind: ClassVar[Kind] = "order"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._threshold = threshold_log_e(plan, alarm_budget)
        self._bar = math.exp(self._threshold)
        self._factors = {name: _Factor() for name in plan.factors}
        self._position = -1

    def placed(self, run: Run, _position: int) -> Iterable[Finding]:
        """Enter the run's levels in the order of places."""
        self._position += 1
        found: list[Finding] = []
        for name, factor in self._factors.items():
            wealth = factor.take(factor.levels.number(run.cell.get(name)), self._position)
            if factor.told is None and wealth >= self._bar:
                factor.told = (run.id, self._position)
            if factor.told is not None and factor.e.n >= factor.n_next:
                factor.n_next = next_told(factor.e.n)
                found.append(self._finding(name, factor, *factor.told))
        return found

    def _finding(self, name: str, factor: _Factor, run: str, index: int) -> Finding:
        n = factor.e.n
        by_chance = sum(k * (k - 1) for k in factor.e.counts) / max(1, n * (n - 1))
        return Finding(
            key=f"order:{name}",
            kind="order",
            message=_message(name, factor, by_chance),
            along=name,
            run=run,
            index=index,
            n=n,
            log_e=factor.e.segments.log_e(),
            threshold=self._threshold,
            share=factor.n_alike / max(1, n - 1),
            n_again=len(factor.e.counts) * min(factor.e.counts),
        )


def _message(name: str, factor: _Factor, by_chance: float) -> str:
    labels = factor.levels.labels
    if all(last < first for last, first in zip(factor.last, factor.first[1:], strict=False)):
        told = f"every run of {labels[0]} came before every run of {labels[1]}"
        more = f", and so on for {counted(len(labels), 'level')}" if len(labels) > 2 else ""
        return f"the levels of {name} did not come in random order: {told}{more}"
    alike = factor.n_alike / max(1, factor.e.n - 1)
    return (
        f"the levels of {name} did not come in random order: {alike:.0%} of the runs have the level of "
        f"the run before, {by_chance:.0%} would by chance"
    )


def late_finding(*, n_late: int, n: int, run: str | None) -> Finding:
    """Return the finding that many runs came after their place in the order had passed.

    Parameters
    ----------
    n_late, n : late runs, and all runs that landed.
    run : id of the last late run.
    """
    share = n_late / max(1, n)
    message = (
        f"{counted(n_late, 'run')} of {n:,} ({share:.1%}) landed after their place in the order had "
        "passed; they are kept and not audited"
    )
    holds = share > MAX_LATE_SHARE
    return Finding(key="order:late", kind="order", message=message, run=run, n=n, share=share, holds=holds)


def landing_order_finding(*, response: str, pvalue: float, correlation: float, n: int) -> Finding:
    """Return the finding that the order of landing depends on the outcome.

    Parameters
    ----------
    response : the response that goes with the duration of runs that overlapped.
    pvalue, correlation : of a test that it depends on the duration (rank correlation, within cells).
    n : runs compared.
    """
    message = (
        f"landing order depends on the outcome: {response} goes with the duration of runs (rank "
        f"correlation {correlation:.2f}), and short runs land first; serial and drift warnings are void here"
    )
    log_e = None if pvalue <= 0 else -math.log(pvalue)
    return Finding(
        key=f"order:landing:{response}", kind="order", message=message, response=response, n=n, log_e=log_e
    )
