"""When something began: a run with its time, between the last before and the first after."""

from __future__ import annotations

from datetime import UTC, datetime

import msgspec


class Moment(msgspec.Struct, frozen=True, kw_only=True):
    """A run at which something is said to be so."""

    run: str
    position: int
    at: datetime | None = None


class Change(msgspec.Struct, frozen=True, kw_only=True):
    """A level of a nuisance that first appeared at a run: `build b2` at `r0412`.

    `within` is another nuisance and its level, where the change is the first appearance there (build b2 on
    host n3); None for the first appearance in the campaign.
    """

    nuisance: str
    level: str
    moment: Moment
    within: tuple[str, str] | None = None


class Dated(msgspec.Struct, frozen=True, kw_only=True):
    """Since when: the last run before the change and the first after it; `gap` when nobody ran between.

    `earliest` and `latest` are the ends of the set of runs that cannot be excluded as the first.
    """

    last_before: Moment | None = None
    first_after: Moment | None = None
    earliest: Moment | None = None
    latest: Moment | None = None
    gap: bool = False


def when(moment: Moment) -> str:
    """Return `r0412 (12 May 14:07 UTC)`, or the run alone when its time is not known."""
    if moment.at is None:
        return moment.run
    return f"{moment.run} ({moment.at.astimezone(UTC):%d %b %H:%M} UTC)"
