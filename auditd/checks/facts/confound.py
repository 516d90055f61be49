"""What was varied on purpose and cannot be told from what merely differed."""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Iterator
from typing import ClassVar

import msgspec

from auditd.checks.facts.condition import counted
from auditd.checks.facts.crossing import Crossing, Verdict
from auditd.checks.facts.labels import CellIndex, LevelIndex, level_key
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run

FIRST_LOOK = 20
"""Runs placed before the first look at a table."""
LOOK_FACTOR = 1.1
"""Each look comes when the runs have grown by this factor, so that looking stays cheap at a million runs."""


Combination = tuple[tuple[Hashable, ...], tuple[Hashable, ...]]
"""The levels of factors and of nuisances of a run."""


class _Fresh:
    """Runs of one combination of levels since the last look."""

    __slots__ = ("cell", "n", "nuisance")

    def __init__(self, run: Run) -> None:
        self.n = 0
        self.cell = run.cell
        self.nuisance = run.nuisance


class _Pair:
    """One factor (or the cells) against one nuisance: their table and what is said of it by now."""

    def __init__(self, factor: str, nuisance: str) -> None:
        self.factor = factor
        self.nuisance = nuisance
        self.table = Crossing()
        self.told: dict[str, Finding] = {}


class ConfoundFact(Quiet):
    """Find factors that are aliased with a nuisance, wholly or nearly, among the completed runs placed.

    Exact counts, with a bar that chance allocation does not reach: see `crossing.py` for the rules. Looked
    at when the runs have grown by a tenth, from 20 on, and withdrawn at the look at which it no longer holds.
    Where no runs are placed (no order), nothing is asked. Aliasing with the order is the fact `order`.
    """

    kind: ClassVar[Kind] = "confound"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._n = 0
        self._next_look = FIRST_LOOK
        self._fresh: dict[Combination, _Fresh] = {}
        self._cells = CellIndex()
        self._members: dict[tuple[str, int], dict[str, None]] = {}  # factor and level -> its cells' labels
        self._factors = {name: LevelIndex() for name in plan.factors}
        self._nuisances = {name: LevelIndex() for name in plan.nuisance}
        self._asks_cells = len(plan.factors) > 1
        names = [*plan.factors, "cell"] if self._asks_cells else list(plan.factors)
        self._pairs = {(a, b): _Pair(a, b) for b in plan.nuisance for a in names}
        self._tables = [[self._pairs[a, b].table for a in names] for b in plan.nuisance]

    def placed(self, run: Run, position: int) -> Iterable[Finding]:
        """Count the run, and look at the tables when it is time."""
        if not run.completed or not self._pairs:
            return ()
        key: Combination = (tuple(run.cell.values()), tuple(run.nuisance.values()))
        if bool in map(type, key[0]) or bool in map(type, key[1]):
            key = (tuple(map(level_key, run.cell.values())), tuple(map(level_key, run.nuisance.values())))
        entry = self._fresh.get(key)
        if entry is None:
            entry = self._fresh[key] = _Fresh(run)
        entry.n += 1
        self._n += 1
        if self._n < self._next_look:
            return ()
        self._next_look = max(self._n + 1, int(self._n * LOOK_FACTOR))
        self._count_fresh()
        return list(self._look(run, position))

    def _count_fresh(self) -> None:
        """Enter the runs since the last look into the tables, each combination of levels once."""
        for fresh in self._fresh.values():
            rows = [index.number(fresh.cell[name]) for name, index in self._factors.items()]
            cell = self._cells.number(fresh.cell)
            for name, row in zip(self._factors, rows, strict=True):
                self._members.setdefault((name, row), {})[self._cells.labels[cell]] = None
            if self._asks_cells:
                rows.append(cell)
            for (name, index), tables in zip(self._nuisances.items(), self._tables, strict=True):
                column = index.number(fresh.nuisance.get(name))
                for row, table in zip(rows, tables, strict=True):
                    table.count(row, column, fresh.n)
        self._fresh.clear()

    def _look(self, run: Run, position: int) -> Iterator[Finding]:
        """Yield what has begun or ended since the look before."""
        covered: set[str] = set()  # nuisances of which a factor's own level has been told
        for pair in self._pairs.values():
            verdicts = {} if pair.factor == "cell" and pair.nuisance in covered else self._verdicts(pair)
            if verdicts:
                covered.add(pair.nuisance)
            for name, before in list(pair.told.items()):
                if name not in verdicts:
                    del pair.told[name]
                    yield _ended(before, self._n)
            for name, verdict in verdicts.items():
                if name not in pair.told:
                    pair.told[name] = self._finding(pair, verdict, run, position)
                    yield pair.told[name]

    def _verdicts(self, pair: _Pair) -> dict[str, Verdict]:
        verdicts = pair.table.verdicts(set(pair.told), partial=pair.factor != "cell")
        return {verdict.name: verdict for verdict in verdicts}

    def _finding(self, pair: _Pair, verdict: Verdict, run: Run, position: int) -> Finding:
        rows = self._row_labels(pair.factor)
        columns = self._nuisances[pair.nuisance].labels
        on = _listed([columns[number] for number in verdict.columns])
        of = _listed([rows[number] for number in verdict.rows])
        return Finding(
            key=self._key(pair, verdict),
            kind="confound",
            message=_message(pair, verdict, of, on, self._n),
            along=pair.nuisance,
            level=columns[verdict.columns[0]] if len(verdict.columns) == 1 else None,
            run=run.id,
            index=position,
            n=self._n,
            cells=tuple(rows[number] for number in verdict.rows)
            if pair.factor == "cell"
            else self._cells_of(pair.factor, verdict.rows),
            share=verdict.strength,
            n_again=verdict.n_needed,
        )

    def _key(self, pair: _Pair, verdict: Verdict) -> str:
        """Name the condition; a row's number depends on what came first, its label does not."""
        of = self._row_labels(pair.factor)[verdict.rows[0]] if verdict.kind == "one" else verdict.kind
        return f"confound:{pair.factor}:{pair.nuisance}:{of}"

    def _row_labels(self, factor: str) -> list[str]:
        return self._cells.labels if factor == "cell" else self._factors[factor].labels

    def _cells_of(self, factor: str, rows: tuple[int, ...]) -> tuple[str, ...]:
        return tuple(label for row in rows for label in self._members[factor, row])


def _message(pair: _Pair, verdict: Verdict, of: str, on: str, n: int) -> str:
    what = f"{pair.factor} {of}" if pair.factor != "cell" else f"cell {of}"
    if verdict.kind == "apart":
        return (
            f"not separable: {what} ran only on {pair.nuisance} {on}, and no other level of {pair.factor} "
            "ran there"
        )
    if verdict.kind == "one":
        every = "every run" if not verdict.n_elsewhere else f"all but {counted(verdict.n_elsewhere, 'run')}"
        others = (
            f"only {counted(verdict.n_beside, 'run')} of the others ran there too"
            if verdict.n_beside
            else "none of the others did"
        )
        return f"not separable: {every} of {what} ran on {pair.nuisance} {on}; {others}"
    return (
        f"{pair.factor} and {pair.nuisance} went together in {counted(n, 'run')}: Cramér's V "
        f"{verdict.strength:.2f} (0 none, 1 the same thing), so that little of their effects can be told "
        "apart"
    )


def _listed(labels: list[str]) -> str:
    return ", ".join(labels[:3]) + (f" and {len(labels) - 3} more" if len(labels) > 3 else "")


def _ended(before: Finding, n: int) -> Finding:
    return msgspec.structs.replace(
        before, holds=False, n=n, message=f"no longer so after {counted(n, 'run')}: {before.message}"
    )
