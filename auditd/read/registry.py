"""The readers there are, and which of them reads a file."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator

from auditd.errors import BadInput
from auditd.plan import Format, Plan
from auditd.read.csv_table import CsvReader
from auditd.read.json_document import JsonReader
from auditd.read.ndjson import NdjsonReader
from auditd.read.parquet import ParquetReader
from auditd.read.raw import Extent, Raw, Reader
from auditd.read.text_pattern import TextReader
from auditd.records import Refusal

READERS: tuple[type[Reader], ...] = (JsonReader, NdjsonReader, CsvReader, TextReader, ParquetReader)
"""Every reader; a new one is added here and is then under the contract tests."""


class Readers:
    """The readers that one plan needs, made once.

    Parameters
    ----------
    plan : its `landing.format` decides for every file; without it a file's suffix does.
    """

    def __init__(self, plan: Plan) -> None:
        self._by_format: dict[Format, Reader] = {
            kind.format: _make(kind, plan) for kind in READERS if _needed(kind, plan)
        }
        self._fixed = self._by_format[plan.landing.format] if plan.landing.format else None
        self._by_suffix = {suffix: one for one in self._by_format.values() for suffix in one.suffixes}

    @property
    def suffixes(self) -> frozenset[str]:
        """The suffixes of file names that the plan's format, or any format, has."""
        return frozenset(self._fixed.suffixes if self._fixed else self._by_suffix)

    def of(self, path: str) -> Reader | None:
        """Return the reader of a file; None where neither plan nor suffix says."""
        return self._fixed or self._by_suffix.get(os.path.splitext(path)[1].lower())


def _needed(kind: type[Reader], plan: Plan) -> bool:
    return kind is not TextReader or plan.landing.pattern is not None


def _make(kind: type[Reader], plan: Plan) -> Reader:
    if kind is TextReader:
        return TextReader(plan.landing.pattern or "")
    make: Callable[[], Reader] = kind
    return make()


def reader_for(path: str, plan: Plan) -> Reader | None:
    """Return the reader of a file: by `landing.format`, else by the suffix; None where neither says."""
    return Readers(plan).of(path)


def read_file(path: str | os.PathLike[str], plan: Plan) -> Iterator[Raw | Refusal]:
    """Yield everything that stands in one file that nobody writes to any more.

    What is not readable comes as a Refusal: of a record, or of the whole file (kind `file`).

    Raises
    ------
    OSError
        The file cannot be opened or read.
    BadInput
        Neither the plan nor the suffix says what format the file has.
    """
    name = os.fspath(path)
    reader = reader_for(name, plan)
    if reader is None:
        raise BadInput(f"{name}: no format is known for this suffix; state landing.format")
    shown = storable(name)
    descriptor = os.open(name, os.O_RDONLY | os.O_CLOEXEC)
    try:
        size = os.fstat(descriptor).st_size
        for portion in reader.read(Extent(descriptor=descriptor, path=shown, size=size, final=True)):
            yield from portion.items
            reason = portion.failed or portion.waits
            if reason:
                yield Refusal(
                    path=shown, offset=portion.offset, number=portion.number, reason=reason, kind="file"
                )
    finally:
        os.close(descriptor)


def storable(path: str) -> str:
    r"""Return a path that any store can keep: bytes that are not UTF-8 become `\xNN`."""
    return path if path.isascii() else path.encode(errors="surrogateescape").decode(errors="backslashreplace")
