"""What is measured, what is varied on purpose, and what differs without being asked."""

from __future__ import annotations

import itertools
import math
import re
import statistics

import msgspec

from auditd.drafting import hints
from auditd.drafting.column import Column, Landed
from auditd.drafting.facts import Judged

N_LEVELS_MAX = 60
"""A factor or nuisance with more values is free text or a measurement."""
N_LEVELS_INTEGER = 12
"""Whole numbers with at most so many values, each met again and again, are settings rather than counts."""
N_AGAIN = 3
"""Times that a setting is met on average, at least."""
STRETCHES_PER_LEVEL = 3
"""A value that comes in at most so many stretches over the campaign came with time, not by design."""
LOG_RATIO = 8.0
"""Positive responses whose largest is so many times the smallest, and lopsided, go on the log scale."""
_HASH = re.compile(r"[0-9a-f]{7,40}")
_VERSION = re.compile(r"v?\d+(\.\d+)+([-+.].*)?")
_NUMBERED = re.compile(r"[A-Za-z][A-Za-z_.-]*\d{1,4}")


class Response(msgspec.Struct, frozen=True, kw_only=True):
    """A measured outcome: its column, its scale, and how far runs spread on it."""

    column: Column
    why: str
    scale: str
    why_scale: str
    spread: float


class Circumstances(msgspec.Struct, kw_only=True):
    """Columns by what they are; the rest is kept as metadata, with why."""

    responses: list[Response] = []
    factors: list[Judged] = []
    nuisance: list[Judged] = []
    left: list[tuple[str, str]] = []


def circumstances_of(landed: Landed, taken: set[str], order: list[int]) -> Circumstances:
    """Judge the columns that are no fact of a run; `order` lists records in the order of the runs."""
    found = Circumstances()
    for column in landed.columns:
        if column.key not in taken:
            _judge(column, landed, order, found)
    return found


def _judge(column: Column, landed: Landed, order: list[int], found: Circumstances) -> None:
    levels = column.levels
    if len(levels) <= 1:
        found.left.append((column.key, f"always {next(iter(levels), 'empty')!s:.40}"))
        return
    numbers = column.numbers()
    if numbers is not None and _is_outcome(column, numbers, levels):
        found.responses.append(_response(column, numbers))
        return
    if len(levels) > N_LEVELS_MAX or len(levels) * 1.5 > column.n_stated:
        found.left.append(
            (column.key, f"{len(levels)} different values: neither a setting nor a measurement")
        )
        return
    why = _why_nuisance(column, landed, order)
    if why:
        found.nuisance.append(Judged(column=column, why=why))
    elif column.n_stated < landed.n:
        missing = landed.n - column.n_stated
        why = f"{missing} records do not state it; a factor that is missing is a refusal, so it stands here"
        found.nuisance.append(Judged(column=column, why=why))
    else:
        found.factors.append(Judged(column=column, why=_why_factor(column, levels)))


def _is_outcome(column: Column, numbers: list[float], levels: dict[str, int]) -> bool:
    finite = [number for number in numbers if math.isfinite(number)]
    fractions = any(not number.is_integer() for number in finite)
    again = len(numbers) / max(len(levels), 1)
    if column.around & hints.FACTOR and again >= N_AGAIN:
        return False
    if fractions:
        return len(levels) > N_LEVELS_INTEGER or again < N_AGAIN
    return len(levels) > N_LEVELS_INTEGER and len(levels) > 0.05 * len(numbers)


def _response(column: Column, numbers: list[float]) -> Response:
    finite = sorted(number for number in numbers if math.isfinite(number))
    scale, why = _scale(column, finite)
    scaled = [_scaled(number, scale) for number in finite]
    missing = len(column.values) - column.n_stated
    reason = f"numbers with {len(column.levels):,} different values" + (
        f"; {missing} records do not state it" if missing else ""
    )
    spread = statistics.stdev(scaled) if len(scaled) > 1 else 0.0
    return Response(column=column, why=reason, scale=scale, why_scale=why, spread=spread)


def _scale(column: Column, finite: list[float]) -> tuple[str, str]:
    if len(finite) < 8:
        return "linear", "too few values to judge"
    if finite[0] > 0 and finite[-1] < 1 and column.words & hints.SHARE:
        return "logit", "between 0 and 1, and named as a share"
    if finite[0] > 0 and finite[-1] > LOG_RATIO * finite[0]:
        logs = [math.log(number) for number in finite]
        if abs(_lopsided(logs)) < abs(_lopsided(finite)):
            times = finite[-1] / finite[0]
            return "log", f"positive, the largest is {times:.0f} times the smallest, lopsided without it"
    return "linear", "no reason for another"


def _lopsided(ordered: list[float]) -> float:
    """Return Bowley's quartile skewness with tenths in place of quarters, from -1 to 1."""
    n = len(ordered)
    low, middle, high = ordered[n // 10], ordered[n // 2], ordered[n - 1 - n // 10]
    return (high + low - 2 * middle) / (high - low) if high > low else 0.0


def _scaled(number: float, scale: str) -> float:
    if scale == "log":
        return math.log(number)
    return math.log(number / (1 - number)) if scale == "logit" else number


def _why_nuisance(column: Column, landed: Landed, order: list[int]) -> str:
    """Return why a column is taken for a circumstance; empty where it is not."""
    shown = _shown(column.levels)
    if column.words & hints.NUISANCE or column.around & (hints.NUISANCE - {"batch"}):
        return f"{shown}; named as a circumstance"
    if column.words & hints.FACTOR or column.around & hints.FACTOR:
        return ""
    reasons = (
        _came_with_time(column, order),
        _reads_like(column),
        "the same throughout each file, so it says who wrote it" if _goes_by_file(column, landed) else "",
    )
    return next((f"{shown}; {reason}" for reason in reasons if reason), "")


def _came_with_time(column: Column, order: list[int]) -> str:
    """Return why a column changed with time and not by design: its values come in few stretches."""
    ordered = [text for record in order if (text := column.texts[record]) is not None]
    counts = column.levels
    stretches = sum(1 for _ in itertools.groupby(ordered))
    expected = len(ordered) * (1 - sum((count / len(ordered)) ** 2 for count in counts.values()))
    if expected > 10 * stretches and stretches <= STRETCHES_PER_LEVEL * len(counts):
        return f"comes in {stretches} stretches, so it changed with time (or is it your order?)"
    return ""


def _reads_like(column: Column) -> str:
    levels = column.levels
    if all(_HASH.fullmatch(text) and not text.isalpha() and not text.isdigit() for text in levels):
        return "reads like a commit or a hash"
    if not all(isinstance(value, str) for value in column.stated[:50]):
        return ""
    if all(_VERSION.fullmatch(text) for text in levels):
        return "reads like a version"
    if len(levels) > 2 and all(_NUMBERED.fullmatch(text) for text in levels):
        return "reads like numbered machines"
    return ""


def _goes_by_file(column: Column, landed: Landed) -> bool:
    """Whether every file of several records holds one value, though files differ."""
    seen: dict[int, set[str | None]] = {}
    counts: dict[int, int] = {}
    for file, text in zip(landed.files, column.texts, strict=True):
        seen.setdefault(file, set()).add(text)
        counts[file] = counts.get(file, 0) + 1
    several = [file for file, count in counts.items() if count > 2]
    return len(several) > 1 and all(len(seen[file]) == 1 for file in several)


def _why_factor(column: Column, levels: dict[str, int]) -> str:
    where = ", and stands among settings" if column.around & hints.FACTOR else ""
    return f"{_shown(levels)}, met throughout{where}"


def _shown(levels: dict[str, int]) -> str:
    names = list(levels)
    shown = ", ".join(f"{name:.24}" for name in names[:5])
    return f"{len(names)} values ({shown}{', …' if len(names) > 5 else ''})"
