"""What `runaudit explain` tells: of each kind of warning and each offline check, for somebody at work."""

from __future__ import annotations

import difflib
import functools
import tomllib
from importlib import resources

import msgspec

from auditd.errors import BadInput

_FILES = ("explanations_kinds.toml", "explanations_checks.toml", "explanations_comparisons.toml")


class Explanation(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """One entry.

    `asks` is the question, `rests_on` what its answer assumes and how sure it is, `blind_to` what it cannot
    see, `do` what to do when it warns, `source` the published method or the rule's origin.
    """

    kind: str
    title: str
    asks: str
    rests_on: str
    blind_to: str
    do: str
    source: str


KINDS: tuple[str, ...] = (
    "serial", "drift", "batch", "spread", "clock", "lineage",
    "repeat", "seed", "confound", "order", "time", "gap", "rewrite", "failure", "cap", "silence", "plan",
)  # fmt: skip
"""Kinds of warnings that can be explained."""

CHECKS: tuple[str, ...] = (
    "durbin_watson", "von_neumann_rank", "runs_test", "ljung_box", "breusch_godfrey", "autocorrelation",
    "integrated_time", "mann_kendall", "pettitt", "selected_shift", "cusum", "ewma", "one_way",
    "variance_components",
    "intraclass", "newey_west", "cluster_covariance", "welch_anova", "kruskal_wallis", "brown_forsythe",
    "levene", "bartlett", "shapiro_wilk", "anderson_darling", "generalized_esd", "grubbs", "fisher_g",
    "lomb_scargle", "cramers_v", "level_order", "hedges_g", "equivalence", "daily_cycle",
    "parent_correlation",
)  # fmt: skip
"""Offline checks and estimators that can be explained, by the names of `auditd.checks` and `auditd.stats`."""


def explain(kind: str) -> Explanation:
    """Return what is to be told of a kind of warning or an offline check.

    Raises
    ------
    BadInput
        Nothing has that name; the nearest ones are named.
    """
    known = _all()
    name = kind.strip().lower().replace("-", "_")
    if name not in known:
        near = difflib.get_close_matches(name, known, n=3, cutoff=0.4)
        hint = f"did you mean {' or '.join(near)}?" if near else f"kinds are {', '.join(KINDS)}"
        raise BadInput(f"nothing to explain under {kind!r}; {hint}")
    return known[name]


class _File(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """A file of entries."""

    explanation: list[Explanation]


@functools.cache
def _all() -> dict[str, Explanation]:
    found: dict[str, Explanation] = {}
    for name in _FILES:
        text = resources.files("auditd.verdicts").joinpath(name).read_text(encoding="utf-8")
        for entry in msgspec.convert(tomllib.loads(text), _File).explanation:
            found[entry.kind] = entry
    return found
