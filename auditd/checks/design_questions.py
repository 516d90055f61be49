"""Questions about the design, of no response: the order of levels, and labels that cannot be told apart."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import msgspec
import numpy as np

from auditd.checks.answer import Answer, Z
from auditd.errors import BadInput, NotTestable
from auditd.records import Effect, level_label
from auditd.series.table import Coded, Ints, RunTable

ORDER = "level_order"
ALIAS = "cramers_v"
ORDER_NULL = "the levels come in random order"
ALIAS_NULL = "factor and nuisance are assigned independently of each other"
ORDER_SOURCE = "Barton & David (1957), Biometrika 44:168-178 (stretches of one level)"
ALIAS_SOURCE = (
    "Cramér (1946), Mathematical Methods of Statistics; Bergsma (2013), J. Korean Stat. Soc. 42:323-328"
)
V_TINY = 0.1
"""Cramér's V below which the association is small (Cohen 1988, Statistical Power Analysis, 7.2)."""
EXPECTED_MIN = 1.0
"""Smallest expected count below which the chi-squared p-value is rough (Cochran 1954, Biometrics 10:417)."""


def design_answers(table: RunTable) -> Iterator[Answer]:
    """Yield the answers about each factor: its order, and its association with each nuisance."""
    placed = np.flatnonzero(table.positions >= 0)
    ordered = bool(table.ordered.all())
    for name, coded in factor_codes(table).items():
        yield _order(name, coded, placed, ordered=ordered)
        for other, nuisance in table.nuisance.items():
            yield _alias(name, coded, other, nuisance)


def factor_codes(table: RunTable) -> Mapping[str, Coded]:
    """Return each factor's levels, as codes over the runs."""
    found = {}
    for name in table.cell_values[0] if table.cell_values else ():
        labels = [level_label(cell[name]) for cell in table.cell_values]
        levels = tuple(sorted(set(labels)))
        place = {label: code for code, label in enumerate(levels)}
        lookup = np.array([place[label] for label in labels], dtype=np.int64)
        found[name] = Coded(codes=lookup[table.cells.codes], levels=levels)
    return found


def _order(name: str, coded: Coded, placed: Ints, *, ordered: bool) -> Answer:
    from auditd.stats import level_order

    blank = Answer(
        check=ORDER,
        along=name,
        family="design",
        null=ORDER_NULL,
        assumes="places do not depend on results; levels in blocks are more even than chance, and pass",
        source=ORDER_SOURCE,
        n=len(placed),
    )
    if not ordered:
        return _without(blank, "no order can be established: runs landed in whole tables")
    try:
        found = level_order(coded.codes[placed], np.arange(len(placed)), alternative="clustered")
    except (NotTestable, BadInput) as error:
        return _without(blank, str(error))
    expected = float(found.expected_runs)
    ratio, half = found.n_runs / expected, Z * float(found.sd_runs) / expected
    effect = Effect(
        name="stretches of one level, of those expected",
        value=ratio,
        low=max(ratio - half, 0.0),
        high=ratio + half,
    )
    return _with(blank, statistic=float(found.statistic), pvalue=float(found.pvalue), effect=effect)


def _alias(name: str, coded: Coded, other: str, nuisance: Coded) -> Answer:
    from auditd.stats import cramers_v

    blank = Answer(
        check=ALIAS,
        along=f"{name} and {other}",
        family="design",
        null=ALIAS_NULL,
        assumes="runs are assigned one by one; assignments in blocks are more even than chance",
        source=ALIAS_SOURCE,
        n=len(coded.codes),
    )
    n_levels = len(np.unique(nuisance.codes))
    if n_levels == len(nuisance.codes):
        return _without(blank, f"one run a level of {other}: it cannot be told from the runs themselves")
    try:
        found = cramers_v(coded.codes, nuisance.codes)
    except (NotTestable, BadInput) as error:
        return _without(blank, str(error))
    chi_squared, df, n = float(found.chi_squared), found.df, len(coded.codes)
    n_least = min(len(np.unique(coded.codes)), n_levels) - 1
    low, high = (max(bound, 0.0) for bound in _noncentrality(chi_squared, df))
    effect = Effect(
        name="Cramér's V",
        value=float(found.statistic),
        low=min((low / n / n_least) ** 0.5, float(found.statistic)),
        high=max(min((high / n / n_least) ** 0.5, 1.0), float(found.statistic)),
    )
    made = _with(blank, statistic=chi_squared, pvalue=float(found.pvalue), effect=effect)
    if found.smallest_expected < EXPECTED_MIN:
        rough = f"the p-value is rough: a combination is expected {found.smallest_expected:.2g} times only"
        return msgspec.structs.replace(made, reason=rough)
    return made


def _noncentrality(chi_squared: float, df: int) -> tuple[float, float]:
    """Return bounds of the noncentrality, by the normal law (Smithson 2003, Confidence Intervals, ch. 4)."""
    centre = chi_squared - df
    half = Z * (2 * df + 4 * max(centre, 0.0)) ** 0.5
    return centre - half, centre + half


def _with(blank: Answer, *, statistic: float, pvalue: float, effect: Effect) -> Answer:
    return msgspec.structs.replace(blank, statistic=statistic, pvalue=pvalue, effect=effect)


def _without(blank: Answer, reason: str) -> Answer:
    return msgspec.structs.replace(blank, verdict="not testable", reason=reason)


def tiny_association(answer: Answer) -> str | None:
    """Return the remark that an association found with certainty is small."""
    effect = answer.effect
    if answer.check != ALIAS or answer.verdict != "dependence" or effect is None or effect.high is None:
        return None
    return f"certain and tiny: V lies below {V_TINY:g}" if effect.high < V_TINY else None
