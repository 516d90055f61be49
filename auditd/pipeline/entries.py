"""Stored runs as the auditors take them: arrays and labels, block by block."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from auditd.plan import Plan
from auditd.records import NOT_STATED, Run, cell_label, level_label
from auditd.sequential import EarlierRuns, cells_within_stages
from auditd.series.design import design_rows
from auditd.series.load import response_names
from auditd.series.scales import to_scale
from auditd.store.answers import Answer
from auditd.store.plans import Epoch
from auditd.store.runs import StoredRun


class Entries:
    """The runs that were taken last, as columns.

    Parameters
    ----------
    plan : what is audited.
    epochs : all epochs; a level that one of them restarted or absorbed has cells of its own from there on.
    asides : answers that set runs aside.
    first_position : position of the auditors' index 0.
    """

    def __init__(
        self, plan: Plan, epochs: Sequence[Epoch], asides: Sequence[Answer], first_position: int
    ) -> None:
        self._plan = plan
        self._epochs = epochs
        self._asides = asides
        self._first = first_position
        self._index: dict[str, int] = {}
        self.restart()

    def restart(self) -> None:
        """Forget every run, parents too."""
        self._index.clear()
        self.forget()

    def forget(self) -> None:
        """Begin with no runs; parents stay known."""
        self._raw: dict[str, list[NDArray[np.float64]]] = {name: [] for name in response_names(self._plan)}
        self._cells: list[str] = []
        self._ids: list[str] = []
        self._nuisance: dict[str, list[str]] = {name: [] for name in self._plan.nuisance}
        self._times: list[float] = []
        self._parents: list[int] = []
        self._design: list[NDArray[np.float64]] = []

    def take(self, block: Sequence[StoredRun], *, keep: bool = False) -> Entries:
        """Hold a block of runs, besides or instead of those held."""
        if not keep:
            self.forget()
        if self._plan.record.parent is not None:
            for stored in block:
                self._index[stored.run.id] = (stored.position or 0) - self._first
            self._parents += [self._index.get(stored.run.parent or "", -1) for stored in block]
        aside = np.array([self._is_aside(stored) for stored in block], dtype=bool)
        for name, parts in self._raw.items():
            values = np.array([_audited(stored.run, name) for stored in block], dtype=np.float64)
            values[aside] = np.nan
            parts.append(values)
        self._cells += self._labelled(block)
        self._ids += [stored.run.id for stored in block]
        for name, labels in self._nuisance.items():
            labels += [level_label(stored.run.nuisance.get(name, NOT_STATED)) for stored in block]
        self._times += [_time(stored.run) for stored in block]
        if self._plan.baseline.kind == "formula":
            self._design.append(design_rows(self._plan, [stored.run.cell for stored in block]))
        return self

    def of(self, response: str, plan: Plan) -> EarlierRuns:
        """Return the held runs of one response, on its audited scale; NaN for runs that are not audited."""
        scale = plan.responses[response].scale if response in plan.responses else "linear"
        parts = self._raw[response]
        return EarlierRuns(
            values=to_scale(np.concatenate(parts) if parts else np.empty(0), scale),
            cells=self._cells,
            ids=self._ids,
            nuisance=self._nuisance,
            times=np.array(self._times),
            parents=np.array(self._parents) if self._plan.record.parent is not None else None,
            design=np.vstack(self._design) if self._design else None,
        )

    def _labelled(self, block: Sequence[StoredRun]) -> list[str]:
        """Return the labels within which runs are ranked; a restarted or absorbed level has its own."""
        names = [cell_label(stored.run.cell) for stored in block]
        if self._plan.design.allocation == "outcome":
            names = cells_within_stages(names, [str(stored.run.stage) for stored in block])
        for epoch in self._epochs[1:] if self._plan.seeds.role == "unique" else ():
            for k, stored in enumerate(block):
                if (stored.position or 0) >= epoch.from_position and _matches(stored.run, epoch.scope):
                    names[k] += f" #{epoch.epoch}"
        return names

    def _is_aside(self, stored: StoredRun) -> bool:
        return any(
            answer.from_position is not None
            and (stored.position or 0) >= answer.from_position
            and _in_scope(stored.run, answer)
            for answer in self._asides
        )


def _audited(run: Run, response: str) -> float:
    if response != "completed" and not run.completed:
        return math.nan
    return run.responses.get(response, math.nan)


def _time(run: Run) -> float:
    at = run.started or run.finished
    return math.nan if at is None else at.timestamp()


def _matches(run: Run, scope: dict[str, str]) -> bool:
    return all(level_label(run.nuisance.get(name, NOT_STATED)) == level for name, level in scope.items())


def _in_scope(run: Run, answer: Answer) -> bool:
    """Whether runs to come are set aside: an answer with an end takes out what is past only."""
    scope = {name: level for name, level in answer.scope.items() if name not in {"from", "to"}}
    return "to" not in answer.scope and _matches(run, scope)
