"""Questions about the design, of no response: the order of levels, and labels that cannot be told apart."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from auditd.checks.answer import Answer
from auditd.errors import BadInput, NotTestable
from auditd.records import Effect
from auditd.series.table import Coded, Ints, RunTable

ORDER = "level_order"
ALIAS = "cramers_v"
ORDER_NULL = "the levels come in random order"
ALIAS_NULL = "factor and nuisance are assigned independently of each other"
ORDER_SOURCE = "Barton & David (1957), Biometrika 44:168-178 (stretches of one level)"
ALIAS_SOURCE = (
    "Cramér (1946), Mathematical Methods of Statistics; Bergsma (2013), J. Korean Stat. Soc. 42:323-328"
)


def design_answers(table: RunTable) -> Iterator[Answer]:
    """Yield the answers about each factor: its order, and its association with each nuisance."""
    placed = np.flatnonzero(table.positions >= 0)
    for name, coded in factor_codes(table).items():
        yield _order(name, coded, placed)
        for other, nuisance in table.nuisance.items():
            yield _alias(name, coded, other, nuisance)


def factor_codes(table: RunTable) -> Mapping[str, Coded]:
    """Return each factor's levels, as codes over the runs."""
    from auditd.records import level_label

    found = {}
    for name in table.cell_values[0] if table.cell_values else ():
        labels = [level_label(cell[name]) for cell in table.cell_values]
        levels = tuple(sorted(set(labels)))
        lookup = np.array([levels.index(label) for label in labels], dtype=np.int64)
        found[name] = Coded(codes=lookup[table.cells.codes], levels=levels)
    return found


def _order(name: str, coded: Coded, placed: Ints) -> Answer:
    from auditd.stats import level_order

    def made(**found: object) -> Answer:
        return Answer(
            check=ORDER,
            along=name,
            family="design",
            null=ORDER_NULL,
            assumes="places do not depend on results",
            source=ORDER_SOURCE,
            n=len(placed),
            **found,  # type: ignore[arg-type] # fields of Answer
        )

    try:
        found = level_order(coded.codes[placed], np.arange(len(placed)), alternative="clustered")
    except (NotTestable, BadInput) as error:
        return made(verdict="not testable", reason=str(error))
    ratio = float(found.n_runs / found.expected_runs)
    return made(
        statistic=float(found.statistic),
        pvalue=float(found.pvalue),
        effect=Effect(name="stretches of one level, of those expected", value=ratio),
    )


def _alias(name: str, coded: Coded, other: str, nuisance: Coded) -> Answer:
    from auditd.stats import cramers_v

    def made(**found: object) -> Answer:
        return Answer(
            check=ALIAS,
            along=f"{name} and {other}",
            family="design",
            null=ALIAS_NULL,
            assumes="runs are assigned one by one; assignments in blocks are more even than chance",
            source=ALIAS_SOURCE,
            n=len(coded.codes),
            **found,  # type: ignore[arg-type] # fields of Answer
        )

    try:
        found = cramers_v(coded.codes, nuisance.codes)
    except (NotTestable, BadInput) as error:
        return made(verdict="not testable", reason=str(error))
    effect = Effect(name="Cramér's V", value=float(found.statistic))
    return made(statistic=float(found.chi_squared), pvalue=float(found.pvalue), effect=effect)
