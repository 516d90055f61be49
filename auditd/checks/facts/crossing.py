"""A table of runs: rows are levels of what is varied, columns levels of what merely differs."""

from __future__ import annotations

import math
from typing import Literal, NamedTuple

MIN_N_LEVEL = 20
"""Runs of a level before anything is said of it (convention)."""
N_EXPECTED = 14.0
"""Runs (or pairs of runs) that a random allocation would have put elsewhere, and none is there: by chance
this has a probability of about exp(−14) = 8e-7 (Poisson), so that it needs no share of the budget."""
SHARE_ELSEWHERE = 0.05
"""Share of a level's runs elsewhere from which it no longer counts as run on one level only ..."""
N_ELSEWHERE = 5
"""... together with so many of them."""
PARTIAL_RAISED = 0.5
"""Cramér's V from which a factor and a nuisance go together ("large" by Cohen 1988, Statistical Power
Analysis, 2nd ed., table 7.2, for a table with two rows)."""
PARTIAL_WITHDRAWN = 0.4
"""Cramér's V below which that is withdrawn, so that it does not flutter."""


class Verdict(NamedTuple):
    """What is said of a table. `name` tells the conditions of one table apart."""

    kind: Literal["apart", "one", "partial"]
    name: str
    rows: tuple[int, ...]
    columns: tuple[int, ...]
    strength: float
    n_elsewhere: int = 0
    n_beside: int = 0
    n_needed: int = 0


class Crossing:
    """Counts of runs by row and column, kept for pairs that occur.

    Three things are looked for, the graver first:

    apart : the table falls into blocks that share neither rows nor columns, so that the design with rows
        and columns has a rank below rows + columns − 1 and contrasts between blocks cannot be estimated.
        Rows with fewer than 20 runs are left out. Raised only if, by the totals, at least 14 pairs of runs
        of one column would be expected to come from two blocks.
    one : all runs of a row (at least 20) are in one column, while by the other rows' shares at least 14 of
        them would be expected elsewhere. It stands until 5 runs, and 5 % of the row's, are elsewhere.
    partial : Cramér's V, corrected for its bias (Bergsma 2013, Journal of the Korean Statistical Society 42,
        323-328), is at least 0.5, with at least 20 runs in each of two rows and columns, and chi-squared
        beyond what chance reaches with probability exp(−14) (Laurent & Massart 2000, Annals of Statistics
        28, lemma 1).

    Each needs two rows and two columns.
    """

    def __init__(self) -> None:
        self.n = 0
        self.rows: dict[int, dict[int, int]] = {}
        self.columns: dict[int, int] = {}

    def count(self, row: int, column: int, n: int = 1) -> None:
        """Add runs."""
        counts = self.rows.get(row)
        if counts is None:
            counts = self.rows[row] = {}
        counts[column] = counts.get(column, 0) + n
        self.columns[column] = self.columns.get(column, 0) + n
        self.n += n

    def verdicts(self, stood: set[str], *, partial: bool = True) -> list[Verdict]:
        """Return what is to be said by now.

        Parameters
        ----------
        stood : names of what was said at the last look, which is kept down to a lower bar.
        partial : whether Cramér's V is asked.
        """
        if len(self.columns) < 2 or len(self.rows) < 2:
            return []
        grave = self._apart()
        if not grave:
            alone = (self._one(row, stood=f"row{row}" in stood) for row in self.rows)
            grave = [verdict for verdict in alone if verdict is not None]
        if not partial or (grave and "partial" not in stood):
            return grave
        return grave + self._partial(stood="partial" in stood)

    def _apart(self) -> list[Verdict]:
        blocks = self._blocks()
        if len(blocks) < 2 or self._expected_pairs(blocks) < N_EXPECTED:
            return []
        blocks.sort(key=lambda rows: (sum(sum(self.rows[row].values()) for row in rows), rows))
        smallest = blocks[0]  # the block that is told apart; all others ran elsewhere
        columns = sorted({column for row in smallest for column in self.rows[row]})
        n_needed = len(blocks) - 1  # one run of a row in another block's column joins the two
        return [Verdict("apart", "apart", tuple(sorted(smallest)), tuple(columns), 1.0, n_needed=n_needed)]

    def _blocks(self) -> list[list[int]]:
        """Return the rows that are joined by columns, for rows with enough runs."""
        owner: dict[int, int] = {}  # column -> block
        blocks: dict[int, list[int]] = {}
        for row, counts in self.rows.items():
            if sum(counts.values()) < MIN_N_LEVEL:
                continue
            touched = {owner[column] for column in counts if column in owner}
            home = min(touched, default=row)
            blocks.setdefault(home, []).append(row)
            for other in touched - {home}:
                blocks[home] += blocks.pop(other)
                owner.update({column: home for column, block in owner.items() if block == other})
            owner.update(dict.fromkeys(counts, home))
        return list(blocks.values())

    def _expected_pairs(self, blocks: list[list[int]]) -> float:
        """Return how many pairs of runs of one column chance would draw from two blocks."""
        sizes = [sum(sum(self.rows[row].values()) for row in rows) for rows in blocks]
        total = sum(sizes)
        mixed = 1 - sum((size / total) ** 2 for size in sizes)
        by_column: dict[int, int] = {}
        for rows in blocks:
            for row in rows:
                for column, n in self.rows[row].items():
                    by_column[column] = by_column.get(column, 0) + n
        return mixed * sum(n * (n - 1) / 2 for n in by_column.values())

    def _one(self, row: int, *, stood: bool) -> Verdict | None:
        counts = self.rows[row]
        n = sum(counts.values())
        if n < MIN_N_LEVEL:
            return None
        column = max(counts, key=lambda number: counts[number])
        n_elsewhere = n - counts[column]
        if n_elsewhere and (not stood or (n_elsewhere >= N_ELSEWHERE and n_elsewhere > SHARE_ELSEWHERE * n)):
            return None
        n_others = self.n - n
        n_beside = self.columns[column] - counts[column]
        if not n_others or n * (1 - n_beside / n_others) < N_EXPECTED:
            return None
        n_needed = max(math.floor(SHARE_ELSEWHERE * n) + 1, N_ELSEWHERE) - n_elsewhere
        return Verdict(
            "one", f"row{row}", (row,), (column,), 1 - n_elsewhere / n, n_elsewhere, n_beside, n_needed
        )

    def _partial(self, *, stood: bool) -> list[Verdict]:
        rows = [row for row, counts in self.rows.items() if sum(counts.values()) >= MIN_N_LEVEL]
        columns = [column for column, n in self.columns.items() if n >= MIN_N_LEVEL]
        if len(rows) < 2 or len(columns) < 2:
            return []
        chi2, strength = self._cramers_v(rows, columns)
        df = (len(rows) - 1) * (len(columns) - 1)
        by_chance = df + 2 * math.sqrt(df * N_EXPECTED) + 2 * N_EXPECTED
        if strength < (PARTIAL_WITHDRAWN if stood else PARTIAL_RAISED) or (not stood and chi2 < by_chance):
            return []
        n_needed = math.ceil(self.n * (1 - PARTIAL_WITHDRAWN / strength))
        return [Verdict("partial", "partial", tuple(rows), tuple(columns), strength, n_needed=n_needed)]

    def _cramers_v(self, rows: list[int], columns: list[int]) -> tuple[float, float]:
        """Return chi-squared and the bias-corrected V of the table's well-filled part."""
        table = [[self.rows[row].get(column, 0) for column in columns] for row in rows]
        by_row = [sum(line) for line in table]
        by_column = [sum(line) for line in zip(*table, strict=True)]
        n = sum(by_row)
        r, k = len(rows), len(columns)
        if n < 2 or 0 in by_row or 0 in by_column:
            return 0.0, 0.0
        pairs = ((table[i][j], by_row[i] * by_column[j] / n) for i in range(r) for j in range(k))
        phi2 = sum((seen - expected) ** 2 / expected for seen, expected in pairs) / n
        chi2 = n * phi2
        phi2 = max(0.0, phi2 - (r - 1) * (k - 1) / (n - 1))
        free = min(r - (r - 1) ** 2 / (n - 1), k - (k - 1) ** 2 / (n - 1)) - 1
        return chi2, (min(1.0, math.sqrt(phi2 / free)) if free > 0 else 0.0)
