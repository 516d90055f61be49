"""Which findings one cause would raise together: the rules, and the grouping by them."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Literal, NamedTuple

import msgspec

from auditd.plan import AUTO_RESPONSES
from auditd.records import Finding, Kind, Listed
from auditd.verdicts.moments import Change

N_RUNS_SLACK = 50
"""Runs by which an effect may seem to begin before its cause: the date of either is uncertain by so much
at the smallest shifts that are found (the audit's own sets of dates are used where they are wider)."""

Place = Literal["level", "order", "anywhere", "cells", "start"]
"""Where an effect may show: along the cause's own nuisance and level; along the whole order; anywhere; in the
cause's cells; or along the order from the run on at which the cause's level first ran."""
Measured = Literal["response", "secondary", "completed", "anything"]
"""On what: the same response; it or an automatic one; `completed` alone; or anything, facts included."""


class Rule(NamedTuple):
    """A finding of one of the kinds `cause` also raises those of the kinds `effect`, and why."""

    cause: tuple[Kind, ...]
    effect: tuple[Kind, ...]
    place: Place
    on: Measured
    reason: str


RULES: tuple[Rule, ...] = (
    Rule(("drift", "serial", "batch"), ("drift", "serial", "batch", "spread"), "level", "secondary",
         "a level that moves makes its own runs alike, unlike the others' and unlike its earlier ones"),
    Rule(("drift", "serial", "batch"), ("drift", "serial", "spread"), "order", "secondary",
         "the runs of that level stand in the whole order too"),
    Rule(("batch",), ("drift", "serial"), "start", "secondary",
         "a build, say, that comes into use for all shifts everything from its first run on"),
    Rule(("clock",), ("drift", "serial", "batch", "spread"), "anywhere", "secondary",
         "a cycle is a slow signal, and levels that ran at other hours met another part of it"),
    Rule(("lineage",), ("drift", "serial", "spread"), "anywhere", "response",
         "children resemble their parents, and stand near them in the order"),
    Rule(("spread",), ("spread",), "anywhere", "secondary",
         "one change of scatter, seen in the whole and in a part"),
    Rule(("failure",), ("drift", "serial", "batch", "spread"), "anywhere", "completed",
         "the response `completed` counts the same failures"),
    Rule(("failure",), ("failure",), "anywhere", "anything",
         "one spell of failures is seen in its stretch, on its host and in the cells that ran then"),
    Rule(("order",), ("confound",), "anywhere", "anything",
         "levels run one after the other fall on different days and builds"),
    Rule(("confound",), ("confound",), "level", "anything",
         "a factor that ran in one place only takes its cells along"),
    Rule(("confound",), ("confound",), "cells", "anything",
         "a level that ran on one host only met that host's builds and days only"),
    Rule(("order",), ("order",), "anywhere", "anything",
         "a nested list of runs, sorted once, orders all its factors"),
)  # fmt: skip
"""Read top to bottom; the first rule that fits gives the reason."""

FIRST: tuple[Kind, ...] = ("failure", "order", "confound", "lineage", "clock")
"""Kinds that lead whatever the evidence of the others, in this order: they name a cause and not a trace."""


class Group(NamedTuple):
    """One warning: what leads it, with `explains` filled in, and the findings listed under it with "
    "reasons.
    """

    leading: Finding
    explained: tuple[Finding, ...]
    reasons: tuple[str, ...]


def group(findings: Iterable[Finding], changes: Iterable[Change] = ()) -> tuple[Group, ...]:
    """Gather findings under the causes that explain them, by `RULES`.

    The leader is the finding that names a cause (`FIRST`), else the one with the largest `log_e`, else the
    earliest. Nothing is explained that clearly began before its cause, or on another level of the same
    nuisance. Findings that no longer hold stand by themselves.
    """
    known = tuple(changes)
    left = sorted(enumerate(findings), key=_precedence)
    groups: list[Group] = []
    while left:
        _, leader = left.pop(0)
        under: list[tuple[Finding, str]] = []
        rest: list[tuple[int, Finding]] = []
        for number, other in left:
            reason = why_explained(leader, other, known)
            if reason is None:
                rest.append((number, other))
            else:
                under.append((other, reason))
        left = rest
        groups.append(_grouped(leader, under))
    return tuple(groups)


def why_explained(cause: Finding, effect: Finding, changes: Iterable[Change] = ()) -> str | None:
    """Return the reason for which one finding explains another, or None where it does not."""
    if not (cause.holds and effect.holds) or cause.key == effect.key or _began_before(effect, cause):
        return None
    for rule in RULES:
        if cause.kind not in rule.cause or effect.kind not in rule.effect:
            continue
        if _same_measure(rule.on, cause, effect) and _same_place(rule.place, cause, effect, changes):
            return rule.reason
    return None


def _precedence(numbered: tuple[int, Finding]) -> tuple[int, float, int]:
    number, finding = numbered
    first = FIRST.index(finding.kind) if finding.kind in FIRST else len(FIRST)
    return first, -(finding.log_e or 0.0), number


def _grouped(leader: Finding, under: list[tuple[Finding, str]]) -> Group:
    listed = tuple(
        Listed(kind=other.kind, along=other.along, level=other.level, log_e=other.log_e) for other, _ in under
    )
    leading = msgspec.structs.replace(leader, explains=_distinct(leader.explains + listed))
    return Group(leading, tuple(other for other, _ in under), tuple(reason for _, reason in under))


def _distinct(listed: tuple[Listed, ...]) -> tuple[Listed, ...]:
    return tuple({(one.kind, one.along, one.level): one for one in listed}.values())


def _began_before(effect: Finding, cause: Finding) -> bool:
    """Whether an effect clearly began before what would be its cause."""
    ends = effect.since_high if effect.since_high is not None else effect.since
    begins = cause.since_low if cause.since_low is not None else cause.since
    return ends is not None and begins is not None and ends < begins - N_RUNS_SLACK


def _same_measure(on: Measured, cause: Finding, effect: Finding) -> bool:
    if on == "anything":
        return True
    if on == "completed":
        return effect.response == "completed"
    return effect.response == cause.response or (on == "secondary" and effect.response in AUTO_RESPONSES)


def _same_place(place: Place, cause: Finding, effect: Finding, changes: Iterable[Change]) -> bool:
    if place == "anywhere":
        return True
    if place == "order":
        return effect.along == "order"
    if place == "start":
        return effect.along == "order" and _starts_with(effect, cause, changes)
    if place == "cells":
        return bool(effect.cells) and set(effect.cells) <= set(cause.cells)
    return effect.along == cause.along and (effect.level in {None, cause.level} or cause.level is None)


def _starts_with(effect: Finding, cause: Finding, changes: Iterable[Change]) -> bool:
    """Whether an effect begins where a level of the cause's nuisance first ran."""
    return any(
        change.nuisance == cause.along
        and cause.level in {None, change.level}
        and near(change, effect) is not None
        for change in changes
    )


def near(change: Change, finding: Finding) -> int | None:
    """Return the distance (runs) of a change from a finding's date, or None if it is not among its dates."""
    if finding.since is None:
        return None
    low = finding.since_low if finding.since_low is not None else finding.since
    high = finding.since_high if finding.since_high is not None else finding.since
    at = change.moment.position
    return abs(at - finding.since) if low - 1 <= at <= high + 1 else None
