"""A first plan as text: what was judged, why, and what only the operator can know."""

from __future__ import annotations

from collections.abc import Iterator

import msgspec

from auditd.drafting.circumstances import Response
from auditd.drafting.column import Column
from auditd.drafting.facts import Judged
from auditd.drafting.judgement import N_EARLIER, Judgement
from auditd.drafting.times import Timed
from auditd.drafting.toml_text import bare, comment, names_for, quoted

ALIGN = 34
"""Column at which a short comment begins."""
N_LEFT_SHOWN = 12


class Place(msgspec.Struct, frozen=True, kw_only=True):
    """Where the records came from, as the plan states it."""

    title: str
    path: str
    match: list[str]
    format: str | None
    pattern: str | None
    n_files: int
    notes: list[str]


def plan_text(found: Judgement, place: Place) -> str:
    """Return the plan."""
    names = names_for([one.path for one in _named(found)])
    sections = (
        _head(found, place),
        _landing(place),
        _record(found),
        _responses(found, names),
        _factors(found, names),
        _nuisance(found, names),
        _order(found),
        _design(found),
        _comparisons(found, names),
        _optional(found),
    )
    return "\n".join(line for section in sections for line in section) + "\n"


def _named(found: Judgement) -> list[Column]:
    parts = found.circumstances
    judged = [one.column for one in (*parts.factors, *parts.nuisance)]
    return [*(one.column for one in parts.responses), *judged]


def _line(statement: str, why: str = "") -> str:
    return f"{statement:<{ALIGN}} {comment(why)}".rstrip() if why else statement


def _head(found: Judgement, place: Place) -> Iterator[str]:
    yield comment(f"A first plan, drafted from {found.landed.n:,} records in {place.n_files:,} files.")
    yield comment(
        "It works as it stands. Lines with ASK need an answer that only you know; the plan is fixed"
    )
    yield comment("when the first run is taken, so answer them before `runaudit watch` or `runaudit gather`.")
    for note in place.notes:
        yield comment(note)
    yield ""
    yield "[campaign]"
    yield f"title = {quoted(place.title)}"
    yield _line("alarm_budget = 0.05", "ASK: how probable may a false alarm be, over the whole campaign?")
    yield _line("confidence = 0.95")
    yield _line("# horizon = 2000", "ASK: how many runs do you intend? For power only, never a stop.")
    yield ""


def _landing(place: Place) -> Iterator[str]:
    yield "[landing]"
    yield f"paths = [{quoted(place.path)}]"
    yield f"match = [{', '.join(quoted(one) for one in place.match)}]"
    if place.format is not None:
        yield f"format = {quoted(place.format)}"
    if place.pattern is not None:
        yield f"pattern = {quoted(place.pattern)}"
    yield ""


def _record(found: Judgement) -> Iterator[str]:
    yield "[record]"
    yield from _fact("id", found.id, "no column names runs: a run is known by its file and number in it")
    yield from _fact("sequence", found.sequence, "")
    yield from _time("started", found.span.started, found)
    yield from _time("finished", found.span.finished, found)
    yield from _fact("seed", found.seed, "no seeds found: ignored and reused seeds cannot be seen")
    yield from _fact("parent", found.parent, "")
    yield from _fact("status", found.status, "no status found: every record counts as a completed run")
    if found.status is not None:
        values = ", ".join(quoted(text) for text in found.completed)
        yield _line(f"completed = [{values}]", "ASK: which statuses mean that a run's results count?")
    timed = [one for one in (found.span.started, found.span.finished) if one is not None]
    if any(one.naive for one in timed):
        yield _line('zone = "UTC"', "ASK: times are written without an offset; in which zone?")
    if not timed:
        yield comment("no times found: daily cycles, overlaps and clock steps cannot be seen")
    yield ""


def _fact(name: str, judged: Judged | None, without: str) -> Iterator[str]:
    if judged is not None:
        yield _line(f"{name} = {quoted(judged.column.key)}", judged.why)
    elif without:
        yield comment(without)


def _time(name: str, timed: Timed | None, found: Judgement) -> Iterator[str]:
    if timed is not None:
        yield _line(f"{name} = {quoted(timed.column.key)}", found.span.why)


def _responses(found: Judgement, names: dict[tuple[str, ...], str]) -> Iterator[str]:
    for one in found.circumstances.responses:
        yield f"[responses.{bare(names[one.column.path])}]"
        yield _line(f"at = {quoted(one.column.key)}", f"{one.why}; is it an outcome?")
        yield _line(f"scale = {quoted(one.scale)}", one.why_scale)
        yield from _margin(one)
        yield ""


def _margin(one: Response) -> Iterator[str]:
    where = "" if one.scale == "linear" else f" on the {one.scale} scale"
    yield _line(
        "# margin =",
        f"ASK: the smallest difference that matters{where}? All runs together spread by {one.spread:.3g} "
        "(sd).",
    )
    yield _line('# unit = ""', "ASK: in which unit?")


def _factors(found: Judgement, names: dict[tuple[str, ...], str]) -> Iterator[str]:
    yield "[factors]"
    yield comment("ASK: is each of these varied on purpose? What is not belongs under [nuisance].")
    for one in found.circumstances.factors:
        yield _line(f"{bare(names[one.column.path])} = {quoted(one.column.key)}", one.why)
    yield ""


def _nuisance(found: Judgement, names: dict[tuple[str, ...], str]) -> Iterator[str]:
    yield "[nuisance]"
    yield comment("ASK: is each of these left to chance? What you vary on purpose belongs under [factors].")
    for one in found.circumstances.nuisance:
        yield _line(f"{bare(names[one.column.path])} = {quoted(one.column.key)}", one.why)
    if not found.circumstances.nuisance:
        yield comment(
            "nothing found: record at least the host and the build; a difference between them cannot be "
            "seen now"
        )
    yield ""
    exclusive = [
        names[one.column.path] for one in found.circumstances.nuisance if one.column.key in found.exclusive
    ]
    if exclusive:
        yield "[machines]"
        levels = ", ".join(quoted(name) for name in exclusive)
        yield _line(f"exclusive = [{levels}]", "runs on one level hardly ever overlap: one at a time")
        yield ""
    left = found.circumstances.left
    for key, why in left[:N_LEFT_SHOWN]:
        yield comment(f"not used, kept as metadata: {key} ({why})")
    if len(left) > N_LEFT_SHOWN:
        yield comment(f"not used, kept as metadata: {len(left) - N_LEFT_SHOWN} more")
    if left:
        yield ""


def _order(found: Judgement) -> Iterator[str]:
    reasons = {
        "sequence": "runs are audited by their stated number",
        "started": "runs are audited by their start: landing order would depend on how long they took",
        "arrival": "neither number nor start is stated; rows of tables that land whole then have no order",
    }
    yield "[order]"
    yield _line(f"by = {quoted(found.order)}", reasons[found.order])
    if found.order == "started" and found.patience_h is not None:
        yield _line(
            f'patience = "{found.patience_h}h"',
            "files land whole after many runs; so long is waited for them",
        )
    yield ""


def _design(found: Judgement) -> Iterator[str]:
    yield "[design]"
    yield _line('allocation = "fixed"', 'ASK: do results decide what runs next? Then "outcome", with a stage')
    yield ""
    if found.block_seeds:
        yield "[seeds]"
        yield _line('role = "block"', "each seed stands once in every cell: common random numbers")
        yield ""
    if found.share_ranked < 0.5:
        yield "[baseline]"
        yield _line(
            'kind = "pooled"',
            f"only {100 * found.share_ranked:.0f} % of the runs have {N_EARLIER} earlier ones in their cell",
        )
        yield ""


def _comparisons(found: Judgement, names: dict[tuple[str, ...], str]) -> Iterator[str]:
    yield comment(
        "ASK: which comparisons do you intend? State them before you see results; others are marked "
        "unplanned."
    )
    response = next((names[one.column.path] for one in found.circumstances.responses), "RESPONSE")
    factor = next(iter(found.circumstances.factors), None)
    name, a, b = "FACTOR", '"this"', '"that"'
    if factor is not None:
        name = bare(names[factor.column.path])
        a, b = _two_levels(factor.column)
    yield "# [[comparisons]]"
    yield f"# response = {quoted(response)}"
    yield comment(f"between = [{{{name} = {a}}}, {{{name} = {b}}}]")
    yield ""


def _two_levels(column: Column) -> tuple[str, str]:
    shown = []
    for value, text in zip(column.values, column.texts, strict=True):
        if text is not None:
            written = quoted(text) if isinstance(value, str) else text
            if written not in shown:
                shown.append(written)
        if len(shown) == 2:
            break
    return shown[0], shown[-1]


def _optional(_found: Judgement) -> Iterator[str]:
    yield comment("ASK: after how long without a run shall it warn, and whom shall it tell?")
    yield "# [silence]"
    yield '# after = "3h"'
    yield "# [[alerts]]"
    yield '# to = "command"'
    yield '# argv = ["./tell-me"]'
