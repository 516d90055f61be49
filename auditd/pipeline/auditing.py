"""The sequential audit of every response: from placed runs to alarms, made anew from the store at will."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from itertools import islice

import msgspec
import numpy as np
from numpy.typing import NDArray
from sqlalchemy import Connection

from auditd.pipeline.budget import epoch_budget, shares
from auditd.pipeline.evidence_paths import PathRecorder
from auditd.plan import AUTO_RESPONSES, Plan
from auditd.records import NOT_STATED, Run, cell_label, level_label
from auditd.sequential import Alarm, Auditor, Options
from auditd.series.design import design_rows
from auditd.series.load import response_names
from auditd.series.scales import to_scale
from auditd.store.answers import Answer, stored_answers
from auditd.store.plans import Epoch, stored_epochs
from auditd.store.runs import StoredRun, count_runs, stored_runs
from auditd.store.states import Checkpoint, save_checkpoint
from auditd.store.tables import answers, runs

N_RUNS_A_BLOCK = 20_000
"""Runs read from the store and audited at once, to bound memory."""
ORDER_KINDS = ("serial", "drift", "clock")
"""Kinds that rest on the order of the runs; withheld where none can be established."""


class Raised(msgspec.Struct, frozen=True, kw_only=True):
    """An alarm of one response's audit, at a position of the campaign."""

    response: str
    epoch: int
    first_position: int
    alarm: Alarm


class Audit:
    """The auditors of one epoch, one a response.

    Parameters
    ----------
    plan, connection : the plan in use and its store.
    next_position : runs before it are in the store and are audited again, silently.
    """

    def __init__(self, plan: Plan, connection: Connection, next_position: int) -> None:
        self.plan = plan
        self.epochs = stored_epochs(connection)
        self.epoch = self.epochs[-1]
        self.withheld = withheld(plan, ordered=_is_ordered(connection))
        self.responses = response_names(plan)
        self._asides = stored_answers(connection, answers.c.action == "set-aside")
        self._index: dict[str, int] = {}
        self.auditors = {
            name: Auditor(_options(plan, self.epoch, name, self.withheld))
            for name in self.responses
            if set(self.withheld) < {*ORDER_KINDS, "spread", "batch", "lineage"}
        }
        self.recorders = {name: PathRecorder() for name in self.auditors}
        self._refer(connection)
        self.caught_up = self._catch_up(connection, next_position)

    def advance(self, _connection: Connection, entered: Sequence[StoredRun]) -> list[Raised]:
        """Audit the runs that entered, in their order, and return the alarms."""
        found: list[Raised] = []
        for start in range(0, len(entered), N_RUNS_A_BLOCK):
            found += self._advance_block(entered[start : start + N_RUNS_A_BLOCK])
        return sorted(found, key=lambda raised: (raised.alarm.index, self.responses.index(raised.response)))

    def n_scored(self) -> int:
        """Return how many runs have been scored, of the response with the most."""
        return max((auditor.n_scored for auditor in self.auditors.values()), default=0)

    def save(self, connection: Connection) -> None:
        """Save the state of every auditor with the runs that it covers."""
        for name, auditor in self.auditors.items():
            position = self.epoch.from_position + auditor.n_runs
            save_checkpoint(
                connection,
                f"audit:{name}",
                Checkpoint(epoch=self.epoch.epoch, position=position, body=auditor.dump()),
            )

    def _refer(self, connection: Connection) -> None:
        """Let an epoch that restarted one level only rank its runs among the earlier ones of the others."""
        if not self.epoch.scope:
            return
        since = max(epoch.from_position for epoch in self.epochs if not epoch.scope)
        earlier = stored_runs(
            connection,
            runs.c.position >= since,
            runs.c.position < self.epoch.from_position,
            order=runs.c.position,
        )
        for block in _blocks(earlier):
            for name, auditor in self.auditors.items():
                auditor.refer(
                    self._values(block, name),
                    self._cells(block),
                    ids=[stored.run.id for stored in block],
                    design=self._design(block),
                )

    def _catch_up(self, connection: Connection, next_position: int) -> list[Raised]:
        placed = stored_runs(
            connection,
            runs.c.position >= self.epoch.from_position,
            runs.c.position < next_position,
            order=runs.c.position,
        )
        return [raised for block in _blocks(placed) for raised in self._advance_block(block)]

    def _advance_block(self, block: Sequence[StoredRun]) -> list[Raised]:
        if not block:
            return []
        for stored in block:
            self._index[stored.run.id] = (stored.position or 0) - self.epoch.from_position
        cells = self._cells(block)
        labels = {name: _labels(block, name) for name in self.plan.nuisance}
        times = _times(block)
        parents = np.array([self._index.get(stored.run.parent or "", -1) for stored in block])
        design = self._design(block)
        ids = [stored.run.id for stored in block]
        found: list[Raised] = []
        for name, auditor in self.auditors.items():
            advanced = auditor.advance(
                self._values(block, name),
                cells,
                ids=ids,
                nuisance=labels,
                times=times,
                parents=parents if self.plan.record.parent else None,
                design=design,
            )
            self.recorders[name].take(advanced)
            found += [
                Raised(
                    response=name,
                    epoch=self.epoch.epoch,
                    first_position=self.epoch.from_position,
                    alarm=alarm,
                )
                for alarm in advanced.alarms
            ]
        return found

    def _values(self, block: Sequence[StoredRun], response: str) -> NDArray[np.float64]:
        """Return a response on its audited scale; NaN for runs that are not audited."""
        raw = np.array([_audited(stored.run, response) for stored in block])
        for k, stored in enumerate(block):
            if self._asides and self._is_aside(stored):
                raw[k] = np.nan
        scale = self.plan.responses[response].scale if response in self.plan.responses else "linear"
        return to_scale(raw, scale)

    def _is_aside(self, stored: StoredRun) -> bool:
        return any(
            answer.from_position is not None
            and (stored.position or 0) >= answer.from_position
            and _in_scope(stored.run, answer)
            for answer in self._asides
        )

    def _cells(self, block: Sequence[StoredRun]) -> list[str]:
        """Return the labels within which runs are ranked; a restarted or absorbed level has its own."""
        found = []
        for stored in block:
            run = stored.run
            name = cell_label(run.cell)
            if self.plan.design.allocation == "outcome":
                name += f" @{run.stage}"
            for epoch in self.epochs[1:]:
                if (stored.position or 0) >= epoch.from_position and _matches(run, epoch.scope):
                    name += f" #{epoch.epoch}"
            found.append(name)
        return found

    def _design(self, block: Sequence[StoredRun]) -> NDArray[np.float64] | None:
        if self.plan.baseline.kind != "formula":
            return None
        return design_rows(self.plan, [stored.run.cell for stored in block])


def replayed_alarms(plan: Plan, connection: Connection) -> list[Raised]:
    """Return the alarms of the epoch in force, from its stored runs alone."""
    return Audit(plan, connection, count_runs(connection).next_position).caught_up


def withheld(plan: Plan, *, ordered: bool) -> tuple[str, ...]:
    """Return the kinds that cannot be asked honestly under a plan."""
    if plan.design.allocation == "outcome" and plan.design.stage is None:
        return (*ORDER_KINDS, "spread", "batch", "lineage")
    return () if ordered else ORDER_KINDS


def _options(plan: Plan, epoch: Epoch, response: str, left_out: tuple[str, ...]) -> Options:
    parts = shares(plan)
    added = response in AUTO_RESPONSES
    share = parts.added if added else parts.responses
    names = response_names(plan)
    n_sharing = sum((name in AUTO_RESPONSES) == added for name in names)
    return Options(
        nuisances=tuple(plan.nuisance),
        baseline=plan.baseline.kind,
        has_times=plan.record.started is not None or plan.record.finished is not None,
        has_parents=plan.record.parent is not None,
        alarm_budget=epoch_budget(share, epoch.epoch),
        n_responses=n_sharing,
        response=response,
        key=epoch.key,
        withheld=left_out,
    )


def _audited(run: Run, response: str) -> float:
    if response != "completed" and not run.completed:
        return math.nan
    return run.responses.get(response, math.nan)


def _labels(block: Sequence[StoredRun], name: str) -> list[str]:
    return [level_label(stored.run.nuisance.get(name, NOT_STATED)) for stored in block]


def _times(block: Sequence[StoredRun]) -> NDArray[np.float64]:
    stated = [stored.run.started or stored.run.finished for stored in block]
    return np.array([math.nan if at is None else at.timestamp() for at in stated])


def _matches(run: Run, scope: dict[str, str]) -> bool:
    return all(level_label(run.nuisance.get(name, NOT_STATED)) == level for name, level in scope.items())


def _in_scope(run: Run, answer: Answer) -> bool:
    scope = {name: level for name, level in answer.scope.items() if name not in {"from", "to"}}
    return "to" not in answer.scope and _matches(run, scope)


def _is_ordered(connection: Connection) -> bool:
    """Whether an order can be established for the runs that are in the store."""
    unordered = connection.execute(runs.select().where(~runs.c.ordered).limit(1)).first()
    return unordered is None


def _blocks(found: Iterable[StoredRun]) -> Iterator[list[StoredRun]]:
    iterator = iter(found)
    while block := list(islice(iterator, N_RUNS_A_BLOCK)):
        yield block
