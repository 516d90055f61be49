"""All runs of a campaign as columns, in their true order, and one response of them as a series."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from auditd.plan import Plan
from auditd.records import Level
from auditd.series.scales import to_scale

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True)
class Coded:
    """Labels as integer codes, shape (n,), into `levels`."""

    codes: Ints
    levels: tuple[str, ...]

    def labels(self) -> NDArray[np.object_]:
        """Return the labels themselves, shape (n,)."""
        return np.array(self.levels, dtype=object)[self.codes] if self.levels else np.empty(0, object)

    def take(self, keep: Flags | Ints) -> Coded:
        """Return some of the labels, with the same levels."""
        return Coded(codes=self.codes[keep], levels=self.levels)


@dataclass(frozen=True, kw_only=True)
class Series:
    """One response over the runs that can be analysed, in order.

    `values` (n,) on the audited scale, finite; `row` (n,) index into the table; times in POSIX seconds, NaN
    where not stated; `parents` index within the series or -1.
    """

    response: str
    values: Floats
    row: Ints
    positions: Ints
    cells: Coded
    nuisance: Mapping[str, Coded]
    started: Floats
    finished: Floats
    seeds: Coded | None
    parents: Ints | None
    ids: NDArray[np.object_]
    ordered: bool


@dataclass(frozen=True, kw_only=True)
class RunTable:
    """Columns over n runs in their true order; positions are -1 where a run came late.

    `responses` are as written (NaN where missing), `set_aside` marks runs that an answer took out.
    """

    ids: NDArray[np.object_]
    positions: Ints
    arrivals: Ints
    late: Flags
    ordered: Flags
    completed: Flags
    set_aside: Flags
    sequence: Floats
    started: Floats
    finished: Floats
    landed: Floats
    cells: Coded
    cell_values: tuple[Mapping[str, Level], ...]
    nuisance: Mapping[str, Coded]
    seeds: Coded | None
    parents: Ints | None
    stages: Coded | None
    responses: Mapping[str, Floats]

    @property
    def n(self) -> int:
        """The number of runs."""
        return len(self.ids)

    def usable(self, plan: Plan, response: str, *, with_set_aside: bool = False) -> Flags:
        """Return which runs enter the analysis of a response, shape (n,)."""
        keep = np.isfinite(self.audited(plan, response))
        if response != "completed":
            keep &= self.completed
        return keep if with_set_aside else keep & ~self.set_aside

    def audited(self, plan: Plan, response: str) -> Floats:
        """Return a response on its audited scale, shape (n,)."""
        scale = plan.responses[response].scale if response in plan.responses else "linear"
        return to_scale(self.responses[response], scale)

    def series(self, plan: Plan, response: str, *, with_set_aside: bool = False) -> Series:
        """Return one response over the runs that can be analysed."""
        keep = np.flatnonzero(self.usable(plan, response, with_set_aside=with_set_aside))
        return Series(
            response=response,
            values=self.audited(plan, response)[keep],
            row=keep,
            positions=self.positions[keep],
            cells=self.cells.take(keep),
            nuisance={name: coded.take(keep) for name, coded in self.nuisance.items()},
            started=self.started[keep],
            finished=self.finished[keep],
            seeds=None if self.seeds is None else self.seeds.take(keep),
            parents=None if self.parents is None else _reindexed(self.parents, keep),
            ids=self.ids[keep],
            ordered=bool(self.ordered.all()),
        )


def _reindexed(parents: Ints, keep: Ints) -> Ints:
    """Return parents as indices among the kept runs, -1 where the parent is not kept."""
    where = np.full(len(parents) + 1, -1, dtype=np.int64)
    where[keep] = np.arange(len(keep))
    return where[parents[keep]]
