"""A finished sample as it landed: slices in time, for the demo to land beside the daemon."""

from __future__ import annotations

import csv
import io
import json
import os
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path

from auditd.errors import BadInput
from auditd.simulate.sample_files import slice_number

RESULTS = "results"


@dataclass(frozen=True, kw_only=True)
class Part:
    """Bytes of one file: appended, or, when `whole`, a new file that is moved in complete.

    `path` is relative to the edition's folder, with forward slashes.
    """

    path: str
    content: bytes
    whole: bool
    n_runs: int


@dataclass(frozen=True, kw_only=True)
class Piece:
    """What landed within one slice of 9 hours; `until` is the last finish in it, in POSIX seconds.

    All parts of a piece must land before the next piece: then no run lands later than the plan's patience.
    """

    number: int
    until: float
    parts: tuple[Part, ...]

    @property
    def n_runs(self) -> int:
        """The number of runs in the piece."""
        return sum(part.n_runs for part in self.parts)


@dataclass(kw_only=True)
class _Chunk:
    """Lines, or a whole file, with when the runs in them started and finished (POSIX seconds)."""

    path: str
    content: bytes
    whole: bool
    finishes: list[float] = field(default_factory=list)


def pieces(folder: Path) -> tuple[Piece, ...]:
    """Split an edition's results into slices of 9 hours, in order of time.

    Parameters
    ----------
    folder : an edition of the sample, such as `sample_logs/faulty`.

    Raises
    ------
    BadInput : no results below the folder, or a file that is no part of a sample.
    """
    results = folder / RESULTS
    paths = sorted(path for path in results.rglob("*") if path.is_file()) if results.is_dir() else []
    if not paths:
        raise BadInput(f"{results}: no result files; name an edition of the sample logs")
    chunks: list[_Chunk] = []
    origin_s = float("inf")
    for path in paths:
        own, first_s = _chunks_of(path, path.relative_to(folder).as_posix())
        chunks += own
        origin_s = min(origin_s, first_s)
    return _by_slice(chunks, origin_s)


def land_piece(piece: Piece, folder: Path) -> None:
    """Land a piece below a folder: append with a flush, or write under a temporary name and rename."""
    for part in piece.parts:
        target = folder / part.path
        target.parent.mkdir(parents=True, exist_ok=True)
        if part.whole:
            temporary = target.with_name(f".{target.name}.part")
            temporary.write_bytes(part.content)
            os.replace(temporary, target)
        else:
            with target.open("ab") as stream:
                stream.write(part.content)


def _by_slice(chunks: list[_Chunk], origin_s: float) -> tuple[Piece, ...]:
    slices: dict[int, dict[str, list[_Chunk]]] = {}
    for chunk in chunks:
        number = slice_number(max(chunk.finishes), origin_s)
        slices.setdefault(number, {}).setdefault(chunk.path, []).append(chunk)
    out = []
    for number, (_, files) in enumerate(sorted(slices.items())):
        parts = tuple(_part_of(own) for _, own in sorted(files.items()))
        until = max(finish for own in files.values() for chunk in own for finish in chunk.finishes)
        out.append(Piece(number=number, until=until, parts=parts))
    return tuple(out)


def _part_of(chunks: list[_Chunk]) -> Part:
    return Part(
        path=chunks[0].path,
        content=b"".join(chunk.content for chunk in chunks),
        whole=chunks[0].whole,
        n_runs=sum(len(chunk.finishes) for chunk in chunks),
    )


def _chunks_of(path: Path, name: str) -> tuple[list[_Chunk], float]:
    """Return a file's chunks in their order, and the earliest start in it."""
    content = path.read_bytes()
    try:
        if path.suffix == ".json":
            records = json.loads(content)
            finishes = [_posix_s(record["finished"]) for record in records]
            chunks = [_Chunk(path=name, content=content, whole=True, finishes=finishes)]
        else:
            lines = content.splitlines(keepends=True)
            records = _line_records(path, content)
            head = lines[: len(lines) - len(records)]
            chunks = _line_chunks(name, lines[len(head) :], records, b"".join(head))
        return chunks, min(_posix_s(record["started"]) for record in records)
    except (KeyError, TypeError, ValueError) as error:
        raise BadInput(f"{path}: not a file of the sample logs: {error!r}") from error


def _line_records(path: Path, content: bytes) -> list[dict[str, str]]:
    if path.suffix == ".ndjson":
        return [json.loads(line) for line in content.splitlines()]
    if path.suffix == ".csv":
        return list(csv.DictReader(io.StringIO(content.decode(), newline="")))
    raise ValueError(f"unknown suffix {path.suffix!r}")


def _line_chunks(name: str, lines: list[bytes], records: list[dict[str, str]], head: bytes) -> list[_Chunk]:
    """One chunk a line; the table's header goes with the first."""
    return [
        _Chunk(
            path=name,
            content=(head if number == 0 else b"") + line,
            whole=False,
            finishes=[_posix_s(record["finished"])],
        )
        for number, (line, record) in enumerate(zip(lines, records, strict=True))
    ]


def _posix_s(text: str) -> float:
    return datetime.fromisoformat(text).timestamp()
