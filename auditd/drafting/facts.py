"""A run's own facts among the columns: id, sequence, seed, parent, status; each with the reason."""

from __future__ import annotations

import math

import msgspec

from auditd.drafting import hints
from auditd.drafting.column import Column, Landed

N_STATUS_MAX = 8
"""A status has at most so many values."""
LARGE = 2**24
"""Integers that reach beyond are seeds or hashes rather than counts."""
SHARE_KNOWN = 0.5
"""A parent names runs that are there in at least so many cases."""


class Judged(msgspec.Struct, frozen=True, kw_only=True):
    """A column with a role, and why."""

    column: Column
    why: str


def find_id(landed: Landed, taken: set[str]) -> Judged | None:
    """Return the column that names runs: different in every record, and named so or a short text."""
    unique = [one for one in _free(landed, taken) if _is_unique(one, landed.n) and not _is_measured(one)]
    if not unique:
        return None
    named = [one for one in unique if one.words & hints.ID and not one.words & hints.SEED]
    if named:
        best = max(named, key=lambda one: ("id" in one.words, bool(one.words & {"run", "uuid", "uid"})))
        return Judged(column=best, why="different in every record, and named so")
    texts = [
        one
        for one in unique
        if not one.words & hints.SEED and all(isinstance(value, str) for value in one.stated[:100])
    ]
    return Judged(column=texts[0], why="a text that is different in every record") if texts else None


def find_sequence(landed: Landed, taken: set[str]) -> Judged | None:
    """Return the column that counts runs: whole numbers, each once, nearly without gaps."""
    for one in _free(landed, taken):
        numbers = _integers(one)
        if numbers is None or one.n_stated < landed.n or landed.n < 3 or len(set(numbers)) < len(numbers):
            continue
        dense = max(numbers) - min(numbers) + 1 <= 1.2 * len(numbers)
        if dense and (one.words & (hints.SEQUENCE | hints.ID) or min(numbers) in {0, 1}):
            return Judged(column=one, why=f"whole numbers, each once, from {min(numbers)} to {max(numbers)}")
    return None


def find_seed(landed: Landed, taken: set[str]) -> Judged | None:
    """Return the column of seeds: named so, or large whole numbers that differ from run to run."""
    free = list(_free(landed, taken))
    for one in free:
        if (one.words | one.around) & hints.SEED and not _is_measured(one) and len(one.levels) > 1:
            return Judged(column=one, why="named so")
    for one in free:
        numbers = _integers(one)
        if numbers is not None and len(set(numbers)) > 0.9 * len(numbers) and max(numbers) >= LARGE:
            return Judged(column=one, why="large whole numbers that hardly ever repeat")
    return None


def find_parent(landed: Landed, taken: set[str], ids: Column | None) -> Judged | None:
    """Return the column that names another run of the campaign."""
    if ids is None:
        return None
    known = {text for text in ids.texts if text is not None}
    for one in _free(landed, taken):
        stated = [text for text in one.texts if text not in {None, ""}]
        n_known = sum(text in known for text in stated)
        if len(stated) < 2 or n_known < SHARE_KNOWN * len(stated):
            continue
        if isinstance(one.stated[0], str) or one.words & hints.PARENT:
            return Judged(column=one, why=f"{n_known} of {len(stated)} stated values are ids of other runs")
    return None


def find_status(landed: Landed, taken: set[str]) -> tuple[Judged, list[str]] | None:
    """Return the column that says how a run ended, and the values that mean it completed."""
    for one in _free(landed, taken):
        levels = one.levels
        known = {text for text in levels if _plain(text) in hints.DONE | hints.NOT_DONE}
        named = bool(one.words & hints.STATUS)
        texts = all(isinstance(value, (str, bool)) for value in one.stated)
        if not 1 <= len(levels) <= N_STATUS_MAX or not (named or (texts and len(known) == len(levels) > 1)):
            continue
        if not texts and "0" not in levels:
            continue
        done = [text for text in levels if _plain(text) in hints.DONE]
        if done:
            return Judged(column=one, why=f"says how a run ended: {_counts(levels)}"), done
        if named and texts:
            often = max(levels, key=lambda text: levels[text])
            return Judged(
                column=one, why=f"named so; which value means completed is a guess: {_counts(levels)}"
            ), [often]
    return None


def _counts(levels: dict[str, int]) -> str:
    return ", ".join(
        f"{text} {count}" for text, count in sorted(levels.items(), key=lambda item: -item[1])[:6]
    )


def _plain(text: str) -> str:
    return text.strip().lower().replace("_", "").replace("-", "")


def _free(landed: Landed, taken: set[str]) -> list[Column]:
    return [column for column in landed.columns if column.key not in taken]


def _is_unique(column: Column, n: int) -> bool:
    return column.n_stated == n and len(set(column.texts)) == n


def _is_measured(column: Column) -> bool:
    """Whether a column holds numbers with fractions: a measurement, not a name."""
    return any(
        isinstance(value, float) and not (math.isfinite(value) and value.is_integer())
        for value in column.values
    )


def _integers(column: Column) -> list[int] | None:
    found = []
    for value in column.stated:
        if isinstance(value, str) and value.isascii() and value.isdigit() and len(value) < 400:
            found.append(int(value))
        elif isinstance(value, int) and not isinstance(value, bool):
            found.append(value)
        elif isinstance(value, float) and math.isfinite(value) and value.is_integer():
            found.append(int(value))
        else:
            return None
    return found or None
