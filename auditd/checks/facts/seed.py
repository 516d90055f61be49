"""One seed for more than one run, where each was to have its own."""

from __future__ import annotations

from array import array
from collections.abc import Iterable, Iterator
from typing import ClassVar

from auditd.checks.facts.ancestry import Ancestry
from auditd.checks.facts.condition import Condition, Episodes, counted
from auditd.checks.facts.known_hashes import KnownHashes, Names
from auditd.checks.facts.labels import CellIndex
from auditd.checks.facts.protocol import Quiet
from auditd.plan import Plan
from auditd.records import Finding, Kind, Run


class _Sharing(Condition):
    """Runs that share a seed with an earlier one: (earlier run, later run, later run's cell)."""

    def __init__(self, key: str, run: str, seed: str) -> None:
        super().__init__(key, run)
        self.seed = seed
        self.pairs: list[tuple[str, str, str]] = []


class SeedFact(Quiet):
    """Find seeds that serve two runs: twice in a cell, or anywhere where the plan says `unique`.

    Exact. Judged among completed runs; runs of one restart lineage may share a seed, also when the link
    between them lands later, which withdraws the finding. Texts are compared: "7" and "07" are two seeds.
    """

    kind: ClassVar[Kind] = "seed"

    def __init__(self, plan: Plan, *, alarm_budget: float) -> None:
        super().__init__(plan, alarm_budget=alarm_budget)
        self._anywhere = plan.seeds.role == "unique"
        self._cells = CellIndex()
        self._known = KnownHashes()  # of the seed (and cell): the number of the first run that had it
        self._first_runs = Names()
        self._first_cells = array("i")
        self._ancestry = Ancestry()
        self._n_links_judged = 0
        self._episodes = Episodes()
        self._conditions: dict[str, _Sharing] = {}

    def arrived(self, run: Run, arrival: int) -> Iterable[Finding]:
        """Compare the run's seed with all earlier ones."""
        if run.parent is not None:
            self._ancestry.link(run.id, run.parent)
        if run.seed is None or not run.completed:
            return ()
        cell = self._cells.number(run.cell)
        key = hash(run.seed) if self._anywhere else hash((run.seed, cell))
        number = self._known.get(key)
        if number is None:
            self._known.put(key, self._first_runs.add(run.id))
            self._first_cells.append(cell)
            return ()
        earlier = self._first_runs[number], self._first_cells[number]
        if earlier[0] == run.id or self._ancestry.root(earlier[0]) == self._ancestry.root(run.id):
            return ()
        return self._shared(run, arrival, earlier, self._cells.labels[cell])

    def standing(self) -> Iterator[Finding]:
        """Tell of sharings that have grown, and withdraw those that turned out to be one lineage."""
        if self._ancestry.n_links != self._n_links_judged:
            self._n_links_judged = self._ancestry.n_links
            self._judge_again()
        for condition in self._conditions.values():
            if condition.changed:
                yield self._finding(condition)

    def _shared(self, run: Run, arrival: int, earlier: tuple[str, int], cell: str) -> Iterable[Finding]:
        key = f"seed:{self._episodes.number(arrival)}"
        condition = self._conditions.get(key)
        if condition is None:
            condition = self._conditions[key] = _Sharing(key, run.id, run.seed or "")
        condition.pairs.append((earlier[0], run.id, cell))
        return (self._finding(condition),) if condition.seen(cell) else ()

    def _judge_again(self) -> None:
        for condition in self._conditions.values():
            kept = []
            for pair in condition.pairs:
                if self._ancestry.root(pair[0]) == self._ancestry.root(pair[1]):
                    condition.unseen(pair[2])
                else:
                    kept.append(pair)
            condition.pairs = kept

    def _finding(self, condition: _Sharing) -> Finding:
        condition.changed = False
        earlier, later, cell = condition.pairs[0] if condition.pairs else ("", "", "")
        return Finding(
            key=condition.key,
            kind="seed",
            message=self._message(condition, earlier, later, cell),
            run=condition.run,
            n=condition.n,
            cells=condition.listed_cells(),
            n_again=condition.n,
            holds=condition.n > 0,
        )

    def _message(self, condition: _Sharing, earlier: str, later: str, cell: str) -> str:
        if not condition.n:
            return "the runs that shared a seed belong to one restart lineage"
        where = "" if self._anywhere else f" of cell {cell}"
        total = counted(condition.n, "run has", "runs have")
        return (
            f"seed {condition.seed} of {earlier} was used again by {later}{where}; {total} the seed of an "
            "earlier run"
        )
