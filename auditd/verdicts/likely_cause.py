"""What changed where a finding began, in words."""

from __future__ import annotations

from collections.abc import Sequence

from auditd.records import Finding
from auditd.verdicts.causes import near
from auditd.verdicts.moments import Change, when

MAX_BY_CHANCE = 0.2
"""Expected number of a nuisance's changes among a finding's dates by chance, above which it is not named: a
nuisance with a new level each day is always near (convention)."""


def likely_cause(finding: Finding, changes: Sequence[Change], *, n: int | None = None) -> str | None:
    """Return what first ran where a finding began: `build b2 first ran at r0412 (12 May 14:07 UTC)`.

    Parameters
    ----------
    finding : dated by `since`, `since_low` and `since_high` (positions).
    changes : first appearances of nuisance levels; those that are within one level of another nuisance
        (`within`) are considered for findings on that level only. Of the finding's own nuisance its own
        level alone: it was different from its first run on.
    n : runs audited so far; defaults to the finding's own.

    A coincidence of dates is no proof: two things that changed at once are both named. None when nothing
    changed there, when the finding is as old as the campaign, or when the nuisance changes so often that
    one of its changes is near by chance.
    """
    n_runs = n if n is not None else finding.n
    close: list[tuple[int, Change]] = []
    for change in changes:
        if not _concerns(change, finding):
            continue
        distance = near(change, finding)
        if distance is not None and _n_by_chance(change, finding, changes, n_runs) <= MAX_BY_CHANCE:
            close.append((distance, change))
    if not close:
        return None
    nearest = min(distance for distance, _ in close)
    return _in_words([change for distance, change in close if distance == nearest])


def _concerns(change: Change, finding: Finding) -> bool:
    if change.moment.position == 0:
        return False
    if change.nuisance == finding.along:
        return change.level == finding.level and change.within is None
    return change.within is None or change.within == (finding.along, finding.level)


def _n_by_chance(change: Change, finding: Finding, changes: Sequence[Change], n: int) -> float:
    """Return how many changes of that nuisance would fall among the finding's dates if they fell anywhere."""
    low = finding.since_low if finding.since_low is not None else finding.since or 0
    high = finding.since_high if finding.since_high is not None else finding.since or 0
    like = [
        c
        for c in changes
        if c.nuisance == change.nuisance and c.within == change.within and c.moment.position
    ]
    return len(like) * (high - low + 3) / max(1, n)


def _in_words(changes: list[Change]) -> str:
    named = " and ".join(f"{change.nuisance} {change.level}" for change in changes)
    first = changes[0]
    there = f" on {first.within[0]} {first.within[1]}" if first.within else ""
    together = "" if len(changes) == 1 else ", which cannot be told apart"
    return f"{named} first ran{there} at {when(first.moment)}{together}"
