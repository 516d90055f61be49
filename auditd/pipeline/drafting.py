"""`draft`: a first plan from what has landed."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from pathlib import Path

import msgspec

from auditd.drafting.column import Landed, columns_of
from auditd.drafting.judgement import judge
from auditd.drafting.plan_text import Place, plan_text
from auditd.errors import BadInput, CannotCreate
from auditd.landing.names import is_temporary
from auditd.plan import Plan
from auditd.plan_reading import parse_plan
from auditd.read import Mapper, Raw, read_file, reader_for
from auditd.records import Refusal

N_RECORDS_MAX = 50_000
"""Records that are judged; of more, every second, fourth … is kept, so that the whole campaign is seen."""
N_LINES_TRIED = 200
"""Lines from which the pattern of a text file is made."""
SHARE_LINES = 0.8
"""At least so many of them must match it."""
_PAIR = re.compile(r"([A-Za-z_][A-Za-z0-9_.]*)\s*[=:]\s*(\"[^\"]*\"|[^\s,;]+)")
_READING = '[responses.x]\nat = "x"\n'
"""A plan under which files can be read before there is one."""
Found = tuple[Path, str]
"""A file and its suffix."""


class Drafted(msgspec.Struct, frozen=True, kw_only=True):
    """A plan's text, and how many of the records that were read it would take."""

    text: str
    n_records: int
    n_files: int
    n_refused: int
    reason: str | None


def draft(landing: Path, folder: Path) -> Drafted:
    """Return a first plan for a landing, to be kept in `folder`.

    Raises
    ------
    BadInput
        There is no such folder, or nothing in it can be read.
    """
    if not landing.exists():
        raise BadInput(f"{landing}: there is no such folder; name the one where result files appear")
    files = list(_files(landing))
    reading = parse_plan(_READING)
    readable = [one for one in files if reader_for(one[0].name, reading) is not None]
    texts = [one for one in files if one[1] in {".txt", ".log"}]
    pattern = None
    if not readable and texts:
        pattern = _pattern_of(texts[0][0])
        if pattern is not None:
            reading = parse_plan(
                f'{_READING}[landing]\nformat = "text"\npattern = {msgspec.json.encode(pattern).decode()}\n'
            )
            readable = texts
    if not readable:
        raise BadInput(
            f"{landing}: no result file found among {len(files)} files; known are .json, .ndjson, .jsonl, "
            ".csv, .tsv, "
            ".parquet, and text lines of name=value"
        )
    landed, raws, n_unreadable = _read_all(readable, reading)
    if landed.n == 0 or not landed.columns:
        raise BadInput(f"{landing}: {len(readable)} files hold no record that can be read")
    found = judge(landed)
    if not found.circumstances.responses:
        raise BadInput(
            f"{landing}: no column looks like a measured outcome among "
            f"{', '.join(one.key for one in landed.columns[:12])}"
        )
    place = _place(landing, folder, readable, files, pattern, n_unreadable, landed)
    text = plan_text(found, place)
    refused = _refused(parse_plan(text, folder / "plan.toml"), raws)
    return Drafted(
        text=text,
        n_records=landed.n,
        n_files=len(readable),
        n_refused=len(refused),
        reason=refused[0].reason if refused else None,
    )


def write_draft(text: str, path: Path) -> None:
    """Write a plan where there is none yet.

    Raises
    ------
    CannotCreate
        There is one, or the file cannot be made.
    """
    try:
        with path.open("x", encoding="utf-8") as stream:
            stream.write(text)
    except FileExistsError:
        raise CannotCreate(
            f"{path} is there already; a plan is never overwritten, name another file"
        ) from None
    except OSError as error:
        raise CannotCreate(f"{path} cannot be written: {error.strerror or error}") from error


def _files(landing: Path) -> Iterator[Found]:
    """Yield result files under a folder by name, links not followed; a single file is taken as it is."""
    if landing.is_file():
        yield landing, landing.suffix.lower()
        return
    for folder, inner, names in os.walk(landing):
        inner[:] = sorted(name for name in inner if not is_temporary(name))
        for name in sorted(names):
            path = Path(folder) / name
            if not is_temporary(name) and not path.is_symlink():
                yield path, path.suffix.lower()


def _read_all(files: list[Found], reading: Plan) -> tuple[Landed, list[Raw], int]:
    kept: list[tuple[int, Raw]] = []
    whole: set[int] = set()
    step, n_seen, n_unreadable = 1, 0, 0
    for number, (path, _) in enumerate(files):
        reader = reader_for(path.name, reading)
        if reader is not None and reader.shape == "document":
            whole.add(number)
        for raw in _records(path, reading):
            if isinstance(raw, Refusal):
                n_unreadable += 1
                continue
            if n_seen % step == 0:
                kept.append((number, raw))
            n_seen += 1
            if len(kept) > N_RECORDS_MAX:
                kept, step = kept[::2], step * 2
    return columns_of(kept, whole), [raw for _, raw in kept], n_unreadable


def _records(path: Path, reading: Plan) -> Iterator[Raw | Refusal]:
    try:
        yield from read_file(path, reading)
    except OSError as error:
        yield Refusal(path=str(path), offset=0, number=0, reason=str(error), kind="file")


def _pattern_of(path: Path) -> str | None:
    """Return a pattern for lines of `name=value` pairs, made from the names of the first such line."""
    try:
        with path.open(encoding="utf-8", errors="replace") as stream:
            lines = [line.rstrip("\n") for _, line in zip(range(N_LINES_TRIED), stream, strict=False)]
    except OSError:
        return None
    for line in lines:
        names = [match[1] for match in _PAIR.finditer(line)]
        if len(names) < 2 or len(set(names)) < len(names):
            continue
        parts = [rf"\b{re.escape(name)}\s*[=:]\s*(?P<{_group(name)}>[^\s,;]+)" for name in names]
        pattern = ".*?".join(parts)
        n_matching = sum(re.search(pattern, one) is not None for one in lines)
        if n_matching >= SHARE_LINES * len(lines):
            return pattern
    return None


def _group(name: str) -> str:
    return name.replace(".", "_")


def _place(
    landing: Path,
    folder: Path,
    readable: list[Found],
    files: list[Found],
    pattern: str | None,
    n_unreadable: int,
    landed: Landed,
) -> Place:
    base = landing.parent if landing.is_file() else landing
    absolute, home = Path(os.path.abspath(base)), Path(os.path.abspath(folder))
    path = str(absolute.relative_to(home)) if absolute.is_relative_to(home) else str(absolute)
    suffixes = sorted({path.suffix for path, _ in readable})
    notes = []
    if n_unreadable:
        notes.append(f"{n_unreadable:,} records or files could not be read; they would be refusals.")
    passed = len(files) - len(readable)
    if passed:
        notes.append(f"{passed:,} files with other suffixes were passed over.")
    if landed.n_left_out:
        notes.append(f"{landed.n_left_out:,} columns beyond the first were left alone.")
    title = (
        absolute.parent.name
        if absolute.name in {"results", "runs", "out", "output", "data"}
        else absolute.name
    )
    return Place(
        title=title.replace("_", " ").replace("-", " ").strip().capitalize() or "Campaign",
        path=path,
        match=[landing.name] if landing.is_file() else [f"*{suffix}" for suffix in suffixes],
        format=None if pattern is None else "text",
        pattern=pattern,
        n_files=len(readable),
        notes=notes,
    )


def _refused(plan: Plan, raws: list[Raw]) -> list[Refusal]:
    """Return which records the plan would refuse."""
    mapper = Mapper(plan)
    found = (mapper.map(raw, path="") for raw in raws)
    return [one for one in found if isinstance(one, Refusal)]
