"""What of a schedule has not landed yet."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

from auditd.records import Level, cell_label
from auditd.schedule.randomised_blocks import Schedule, ScheduledRun


@dataclass(frozen=True, kw_only=True)
class LandedRun:
    """What identifies a completed run in a schedule."""

    cell: Mapping[str, Level]
    host: str | None = None
    seed: str | None = None


def rest(schedule: Schedule, landed: Iterable[LandedRun]) -> Schedule:
    """Return the schedule of the runs that have not landed; order, blocks and seeds stay as they were.

    A scheduled run has landed when a run with its seed has. Of the other landed runs, made with seeds of
    their own, each stands for the first scheduled run of its cell on its host that is still missing.
    `efficiency` remains that of the whole schedule, to which the rest belongs.

    Parameters
    ----------
    schedule : the whole schedule; make it again with the same levels, hosts, replicates and seed.
    landed : completed runs.
    """
    scheduled = {run.seed for run in schedule.runs}
    seen: set[str] = set()
    unknown: Counter[tuple[str, str | None]] = Counter()
    for made in landed:
        if made.seed is not None and made.seed in scheduled:
            seen.add(made.seed)
        else:
            unknown[_place_of(made)] += 1
    missing = [run for run in schedule.runs if run.seed not in seen]
    kept = []
    for run in missing:
        if unknown[_place_of(run)] > 0:
            unknown[_place_of(run)] -= 1
        else:
            kept.append(run)
    return replace(schedule, runs=tuple(kept))


def _place_of(run: LandedRun | ScheduledRun) -> tuple[str, str | None]:
    return cell_label(dict(sorted(run.cell.items()))), run.host
