"""Different runs that gave the same results, to the last digit."""

from __future__ import annotations

import math
import struct
from array import array
from collections.abc import Iterable
from typing import ClassVar, NamedTuple

from auditd.checks.facts.condition import Condition, Episodes, counted, next_told
from auditd.checks.facts.known_hashes import KnownHashes, Names
from auditd.checks.facts.labels import CellIndex
from auditd.checks.facts.protocol import Quiet
from auditd.checks.facts.resolution import MAX_CHANCE, Resolution
from auditd.plan import Plan, cells_matching
from auditd.records import Finding, Kind, Run

IGNORED_SHARE = 0.8
"""Share of a cell's runs, from the first one repeated on, that repeat: from here on the seed is not used
there; below, single answers were given twice."""


class _Earlier(NamedTuple):
    """The latest run that gave certain results."""

    run: str
    cell: int
    seed: int
    n_in_cell: int  # completed runs of its cell, itself included


class _LatestRuns:
    """The latest run that gave certain results, by the results' hash; there are as many as runs."""

    def __init__(self) -> None:
        self._known = KnownHashes()
        self._runs = Names()
        self._cells = array("i")
        self._seeds = array("q")
        self._n_in_cell = array("i")

    def replace(self, key: int, run: _Earlier) -> _Earlier | None:
        """Put a run in the place of the one that gave the same results before, and return that one."""
        number = self._known.get(key)
        self._known.put(key, self._runs.add(run.run))
        self._cells.append(run.cell)
        self._seeds.append(run.seed)
        self._n_in_cell.append(run.n_in_cell)
        if number is None:
            return None
        return _Earlier(self._runs[number], self._cells[number], self._seeds[number], self._n_in_cell[number])


class _CellRepeats:
    """A cell's runs: how many, how many repeat, and since which of them."""

    __slots__ = ("first", "n", "n_first", "n_next", "n_repeats", "raised_at")

    def __init__(self) -> None:
        self.n = 0
        self.n_repeats = 0
        self.n_first = 0  # runs of the cell, up to the first one that was repeated
        self.first = ""  # the first run that repeated
        self.raised_at = ""  # the run at which it could be told
        self.n_next = 0  # runs of the cell at which it is told again


class RepeatFact(Quiet):
    """Find results that are equal in all responses under different seeds or in different cells.

    Exact where the digits carry it: an equality counts only if the chance of any such equality in the
    campaign, over all pairs of the runs so far (or of the horizon, if larger), is below 1e-6, by the
    responses' own resolution (`resolution.py`). `duration` and `completed` are left out, and so are cells
    that the plan says are deterministic. Coarse responses, and runs with any response missing, cannot be
    judged. Four causes are told apart: a seed that is not used in a cell (its runs repeat one after the
    other), a factor that is not used (cells agree under one seed), an answer given twice (single runs
    agree with any earlier one) and, in one cell without stated seeds, either of the first and last.
    """

    kind: ClassVar[Kind] = "repeat"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._names = tuple(plan.responses)
        self._packed = struct.Struct(f"={len(self._names)}d").pack
        self._seeds = "under different seeds" if plan.record.seed is not None else "and no seed is stated"
        self._deterministic = plan.design.deterministic
        self._horizon = plan.campaign.horizon or 0
        self._n = 0
        self._cells = CellIndex()
        self._skipped: dict[int, bool] = {}
        self._by_cell: dict[int, _CellRepeats] = {}
        self._latest = _LatestRuns()
        self._resolution = Resolution(len(self._names))
        self._episodes = Episodes()
        self._apart: dict[str, tuple[Condition, str]] = {}  # answers given twice, and factors not used

    def arrived(self, run: Run, arrival: int) -> Iterable[Finding]:
        """Compare the run's results with all earlier ones."""
        if not run.completed:
            return ()
        try:
            values = tuple([run.responses[name] for name in self._names])
        except KeyError:
            return ()
        cell = self._cells.number(run.cell)
        if self._is_skipped(cell, run) or not all(map(math.isfinite, values)):
            return ()
        return self._compared(run, arrival, cell, values)

    def _is_skipped(self, cell: int, run: Run) -> bool:
        skipped = self._skipped.get(cell)
        if skipped is None:
            skipped = any(cells_matching(group, run.cell) for group in self._deterministic)
            self._skipped[cell] = skipped
        return skipped

    def _compared(self, run: Run, arrival: int, cell: int, values: tuple[float, ...]) -> Iterable[Finding]:
        self._n += 1
        tally = self._by_cell.get(cell)
        if tally is None:
            tally = self._by_cell[cell] = _CellRepeats()
        tally.n += 1
        seed = hash(run.seed) if run.seed is not None else 0
        key = hash(self._packed(*values))
        earlier = self._latest.replace(key, _Earlier(run.id, cell, seed, tally.n))
        if earlier is None:
            self._resolution.take(cell, values)
            return self._told_again(cell, tally)
        if earlier.cell == cell and seed and earlier.seed == seed:
            return ()
        n = max(self._n, self._horizon)
        is_chance = n * (n - 1) / 2 * self._resolution.chance(values) >= MAX_CHANCE
        if earlier.cell == cell and (tally.n_repeats or earlier.n_in_cell == tally.n - 1):
            return self._repeated_in_cell(run, cell, earlier, is_chance=is_chance)
        return () if is_chance else self._repeated_apart(run, arrival, cell, earlier)

    def _repeated_in_cell(self, run: Run, cell: int, earlier: _Earlier, *, is_chance: bool) -> list[Finding]:
        """Count a repeat within a cell; one that cannot be judged yet is told with those that can."""
        tally = self._by_cell[cell]
        if not tally.n_repeats:
            tally.n_first, tally.first = earlier.n_in_cell, run.id
        tally.n_repeats += 1
        if not (tally.raised_at or is_chance):
            tally.raised_at = run.id
        return self._told_again(cell, tally)

    def _told_again(self, cell: int, tally: _CellRepeats) -> list[Finding]:
        """Tell of a cell's repeats when they begin, and when the cell has gone on by a tenth since."""
        if not tally.raised_at or tally.n < tally.n_next:
            return []
        tally.n_next = tally.n_first + next_told(tally.n - tally.n_first)
        return [self._cell_finding(cell, tally)]

    def _repeated_apart(self, run: Run, arrival: int, cell: int, earlier: _Earlier) -> list[Finding]:
        seeds_agree = run.seed is not None and earlier.seed == hash(run.seed)
        cause = "factor" if seeds_agree and earlier.cell != cell else "answer"
        key = f"repeat:{cause}:{self._episodes.number(arrival)}"
        if key not in self._apart:
            beside = f" (cell {self._cells.labels[earlier.cell]})" if earlier.cell != cell else ""
            first = f"{run.id} gave the results of {earlier.run}{beside} to the last digit"
            self._apart[key] = (Condition(key, run.id), first)
        condition, first = self._apart[key]
        if condition.seen(self._cells.labels[cell]):
            return [self._apart_finding(condition, first)]
        return []

    def _cell_finding(self, cell: int, tally: _CellRepeats) -> Finding:
        label = self._cells.labels[cell]
        n_since = tally.n - tally.n_first
        share = tally.n_repeats / max(1, n_since)
        if share >= IGNORED_SHARE:
            some = "all of" if tally.n_repeats == n_since else f"{tally.n_repeats + 1} of"
            message = (
                f"{some} the last {counted(n_since + 1, 'run')} of cell {label} are equal to the last "
                f"digit {self._seeds}, since {tally.first}: an ignored seed in one configuration"
            )
        else:
            message = (
                f"{counted(tally.n_repeats, 'run')} of cell {label} gave an earlier result again to the "
                f"last digit {self._seeds}, first {tally.first}: a cache that answers twice"
            )
        return Finding(
            key=f"repeat:cell:{label}",
            kind="repeat",
            message=message,
            run=tally.raised_at,
            n=tally.n,
            cells=(label,),
            share=tally.n_repeats / tally.n,
            n_again=tally.n_repeats,
        )

    def _apart_finding(self, condition: Condition, first: str) -> Finding:
        if condition.key.startswith("repeat:factor"):
            cause = "under one seed: a factor between these cells that is not used"
        else:
            cause = f"{self._seeds}: a cache that answers twice"
        more = f"; {counted(condition.n, 'such run')} so far" if condition.n > 1 else ""
        return Finding(
            key=condition.key,
            kind="repeat",
            message=f"{first} {cause}{more}",
            run=condition.run,
            n=self._n,
            cells=condition.listed_cells(),
            share=condition.n / self._n,
            n_again=condition.n,
        )
