"""What landed, column by column: one value a record, whatever the format and however deep it stood."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from typing import Any

import msgspec

from auditd.read.cells import cell_number
from auditd.read.raw import Raw

N_COLUMNS_MAX = 500
"""More columns than that are no record of a run but data; the rest are left alone."""
Scalar = str | int | float | bool | None


class Column(msgspec.Struct, kw_only=True):
    """One key of the records.

    `values` has one entry a record, None where nothing is stated; `texts` are the values as written.
    """

    key: str
    path: tuple[str, ...]
    values: list[Scalar]
    texts: list[str | None]

    @property
    def stated(self) -> list[Scalar]:
        """The values that are stated."""
        return [value for value in self.values if value is not None]

    @property
    def n_stated(self) -> int:
        """How many records state it."""
        return sum(value is not None for value in self.values)

    @property
    def levels(self) -> dict[str, int]:
        """How often each value as written stands, in order of appearance."""
        counts: dict[str, int] = {}
        for text in self.texts:
            if text is not None:
                counts[text] = counts.get(text, 0) + 1
        return counts

    def numbers(self) -> list[float] | None:
        """Return the stated values as numbers; None where one of them is none."""
        found = []
        for value in self.values:
            if value is None:
                continue
            number = _number(value)
            if number is None:
                return None
            found.append(number)
        return found

    @property
    def words(self) -> set[str]:
        """The parts of the key's last name, in lower case: `runId` and `run_id` are `run` and `id`."""
        return words_of(self.path[-1])

    @property
    def around(self) -> set[str]:
        """The parts of the names above the last."""
        return {word for token in self.path[:-1] for word in words_of(token)}


class Landed(msgspec.Struct, kw_only=True):
    """All that was read: columns of equal length, and from which file each record came."""

    columns: list[Column]
    files: list[int]
    whole_files: set[int]
    n_left_out: int = 0

    @property
    def n(self) -> int:
        """The number of records."""
        return len(self.files)


def words_of(name: str) -> set[str]:
    """Return the words of a name in camel, snake or kebab case, in lower case."""
    spaced = "".join(
        f" {character.lower()}"
        if character.isupper() and k and not name[k - 1].isupper()
        else character.lower()
        if character.isalnum()
        else " "
        for k, character in enumerate(name)
    )
    return {word.rstrip("0123456789") or word for word in spaced.split()}


def columns_of(records: Iterable[tuple[int, Raw]], whole_files: set[int]) -> Landed:
    """Return records as columns; lists are left alone, objects are gone into."""
    columns: dict[tuple[str, ...], Column] = {}
    files: list[int] = []
    left_out: set[tuple[str, ...]] = set()
    for n, (file, raw) in enumerate(records):
        files.append(file)
        for path, value in _leaves(raw.value, ()):
            column = columns.get(path)
            if column is None:
                if len(columns) >= N_COLUMNS_MAX:
                    left_out.add(path)
                    continue
                column = columns[path] = Column(
                    key=_key(path), path=path, values=[None] * n, texts=[None] * n
                )
            _put(column, n, value, raw.written.get(path[0]) if raw.written and len(path) == 1 else None)
    for column in columns.values():
        missing = len(files) - len(column.values)
        column.values += [None] * missing
        column.texts += [None] * missing
    return Landed(
        columns=[column for column in columns.values() if column.n_stated],
        files=files,
        whole_files=whole_files,
        n_left_out=len(left_out),
    )


def _put(column: Column, n: int, value: Scalar, written: str | None) -> None:
    missing = n - len(column.values)
    if missing < 0:
        return
    column.values += [None] * missing
    column.texts += [None] * missing
    if isinstance(value, str) and written is not None:
        number = cell_number(value)
        value = (None if not value.strip() else value) if number is None else number
    column.values.append(value)
    text = written if written is not None else value if isinstance(value, str) else _text(value)
    column.texts.append(None if value is None else text)


def _text(value: Scalar) -> str:
    if isinstance(value, float) and not math.isfinite(value):
        return str(value)
    if isinstance(value, float) and value.is_integer() and abs(value) < 2**53:
        return str(int(value))
    return msgspec.json.encode(value).decode() if isinstance(value, (bool, float)) else str(value)


def _leaves(value: Any, path: tuple[str, ...]) -> Iterator[tuple[tuple[str, ...], Scalar]]:
    for name, inner in value.items():
        if isinstance(inner, dict):
            yield from _leaves(inner, (*path, name))
        elif not isinstance(inner, list):
            yield (*path, name), inner


def _key(path: tuple[str, ...]) -> str:
    """Return a key as a plan writes it: a bare name, or an RFC 6901 pointer."""
    if len(path) == 1 and not path[0].startswith("/"):
        return path[0]
    return "".join("/" + token.replace("~", "~0").replace("/", "~1") for token in path)


def _number(value: Scalar) -> float | None:
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        return None
    try:
        return float(value)
    except OverflowError:
        return None
