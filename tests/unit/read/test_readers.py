"""Readers at the edges that the contract suite does not reach."""

import os
import sys

import pytest

from auditd.errors import BadInput
from auditd.plan_reading import parse_plan
from auditd.read import Extent, read_file, reader_for
from auditd.read.csv_dialect import read_head
from auditd.read.json_text import NotJson, decode_json, depth_exceeds
from auditd.read.parquet import as_json


@pytest.fixture
def plan(tmp_path):
    return parse_plan('[responses.y]\nat = "y"\n', tmp_path / "plan.toml")


def portion_of(path, plan, **extent):
    descriptor = os.open(path, os.O_RDONLY)
    try:
        extent = Extent(descriptor=descriptor, path="x", size=os.path.getsize(path), **extent)
        return list(reader_for(str(path), plan).read(extent))[-1]
    finally:
        os.close(descriptor)


@pytest.mark.parametrize(
    "text",
    [
        '{"a": 1',
        '{"a": "b',
        '{"a": "\u00e4'[:-1],
        "[1, 2",
        '{"a": Na',
        '{"a": -Inf',
        '{"a": -',
        '{"a": 1.',
        '{"a": NaN, "b',
        "",
        "  ",
    ],
)
def test_what_may_still_become_json_is_half(text):
    """A prefix of some JSON text is told from what never can become one, so that it is waited for."""
    with pytest.raises(NotJson) as caught:
        decode_json(text.encode())
    assert caught.value.half


def test_a_character_cut_in_two_is_half():
    """Bytes of one character may come in two writes."""
    with pytest.raises(NotJson) as caught:
        decode_json('{"a": "\u00e4'.encode()[:-1])
    assert caught.value.half


@pytest.mark.parametrize(
    "data",
    [
        b'{"a" 1',
        b"{,",
        b"[1 2",
        b'{"a": \xff"',
        b"nope",
        b"[trux",
        b'{"a" 1, N',
        b"{} {}",
        b'{"a": "\\ud800"}',
        b"{'a",
    ],
)
def test_what_never_becomes_json_is_not_half(data):
    """No more bytes mend these."""
    with pytest.raises(NotJson) as caught:
        decode_json(data)
    assert not caught.value.half


@pytest.mark.parametrize(("depth", "refused"), [(64, False), (65, True), (100_000, True)])
def test_depth(depth, refused):
    """64 levels are read, 65 and 100,000 are refused without a crash; siblings do not count as depth."""
    text = b"[" * depth + b"]" * depth
    if refused:
        with pytest.raises(NotJson, match="deeper"):
            decode_json(text)
    else:
        assert decode_json(text)
    assert not depth_exceeds([[1]] * 500, 64)


def test_of_a_name_twice_the_last_counts():
    """As in the json module."""
    assert decode_json(b'{"a": 1, "a": 2}') == {"a": 2}


@pytest.mark.parametrize(
    ("line", "delimiter", "names"),
    [
        ("a,b", ",", ["a", "b"]), ("a;b;c", ";", ["a", "b", "c"]), ("a\tb", "\t", ["a", "b"]),
        ("a|b", "|", ["a", "b"]),
        ('"x,y,z";b', ";", ["x,y,z", "b"]), ("alone", ",", ["alone"]), (" a , b ", ",", ["a", "b"]),
    ],
)  # fmt: skip
def test_heads(line, delimiter, names):
    """The delimiter is the one that stands most often outside quotes; names are stripped."""
    head = read_head(line)
    assert (head.delimiter, head.names) == (delimiter, names)


@pytest.mark.parametrize("line", ["a,b,a", ",,", '"a', ""])
def test_heads_that_are_none(line):
    """Names that stand twice, or none at all, refuse the table."""
    with pytest.raises(BadInput, match="header"):
        read_head(line)


def test_a_quote_that_does_not_close_waits(plan, tmp_path):
    """A record that spans lines is complete only when its quotes close; the reason names its byte."""
    path = tmp_path / "x.csv"
    path.write_text('y,z\n1,"a\nb"\n2,"c\n3,d\n')
    portion = portion_of(path, plan)
    assert [raw.written for raw in portion.items] == [{"y": "1", "z": "a\nb"}]
    assert portion.offset == 12
    assert "byte 12" in portion.waits


def test_a_quote_that_never_closes_costs_one_line(plan, tmp_path, monkeypatch):
    """Beyond a record's limit the first line is refused, and the lines behind it are read."""
    monkeypatch.setattr("auditd.read.csv_table.MAX_RECORD_BYTES", 200)
    path = tmp_path / "x.csv"
    path.write_text('y,z\n1,"a\n' + "2,b\n" * 100)
    items = list(read_file(path, plan))
    assert "does not close" in items[0].reason
    assert len(items) == 101


def test_records_larger_than_a_block(plan, tmp_path, monkeypatch):
    """Records that fill blocks, whole or in part, come out whole, in lines and in tables."""
    for module in ("lines", "csv_table"):
        monkeypatch.setattr(f"auditd.read.{module}.BLOCK_BYTES", 64)
    monkeypatch.setattr("auditd.read.lines.read_block.__defaults__", (64,))
    lines = [f'{{"y": {k}, "z": "{"x" * (k * 7 % 150)}"}}' for k in range(60)]
    (tmp_path / "x.ndjson").write_text("\n".join(lines) + "\n")
    assert [raw.value["y"] for raw in read_file(tmp_path / "x.ndjson", plan)] == list(range(60))
    rows = ['{},"{}"'.format(k, "x\n" * (k * 7 % 90)) for k in range(60)]
    (tmp_path / "x.csv").write_text("y,z\n" + "\n".join(rows) + "\n")
    got = list(read_file(tmp_path / "x.csv", plan))
    assert [(raw.value["y"], len(raw.value.get("z", ""))) for raw in got] == [
        (k, 2 * (k * 7 % 90)) for k in range(60)
    ]


def test_bare_carriage_returns_are_named(plan, tmp_path):
    """A table whose lines end as on old machines is refused with that reason."""
    (tmp_path / "x.csv").write_bytes(b"y,z\r1,2\r3,4\r")
    (refusal,) = read_file(tmp_path / "x.csv", plan)
    assert "carriage returns" in refusal.reason


def test_parquet_without_its_extra(plan, tmp_path, monkeypatch):
    """Without pyarrow the file is refused with the command that mends it."""
    (tmp_path / "x.parquet").write_bytes(b"PAR1" + b"\0" * 20 + b"PAR1")
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    (refusal,) = read_file(tmp_path / "x.parquet", plan)
    assert refusal.kind == "file"
    assert "auditd[parquet]" in refusal.reason


def test_parquet_types(plan, tmp_path):
    """Times, decimals, bytes, intervals and nested values become JSON values."""
    from datetime import UTC, date, datetime, timedelta
    from decimal import Decimal

    cells = [
        datetime(2026, 3, 1, tzinfo=UTC),
        date(2026, 3, 1),
        Decimal("1.5"),
        Decimal(10**30),
        b"a",
        b"\xff",
        timedelta(seconds=90),
        {"k": [b"b"]},
        1,
    ]
    told = ["2026-03-01T00:00:00+00:00", "2026-03-01", 1.5, 10**30, "a", "ff", 90.0, {"k": ["b"]}, 1]
    assert [as_json(cell) for cell in cells] == told


def test_a_document_that_is_too_large(plan, tmp_path):
    """A single record over 16 MiB, or a document over 256 MiB (a hole), is refused unread."""
    for size, words in ((2**24 + 100, "16 MiB"), (2**28 + 1, "ndjson")):
        path = tmp_path / "x.json"
        path.write_bytes(b'{"y": 1' if size < 2**28 else b"[")
        os.truncate(path, size)
        portion = portion_of(path, plan)
        assert words in portion.failed


def test_an_array_of_mixed_items(plan, tmp_path):
    """Items that are no runs are refused one by one; the others are read, also beside bare NaN."""
    for text in ('[{"y": 1}, 2, {"y": 1e400}, [], {"y": 3}]', '[{"y": NaN}, 2, "a", null, {"y": 3}]'):
        (tmp_path / "x.json").write_text(text)
        items = list(read_file(tmp_path / "x.json", plan))
        assert [item.number for item in items] == [0, 1, 2, 3, 4]
        assert [hasattr(item, "reason") for item in items] == [False, True, True, True, False]


def test_formats_are_chosen_by_plan_or_suffix(tmp_path):
    """landing.format decides for every name; otherwise the suffix does, in any case; else nobody knows."""
    text = '[landing]\nformat = "ndjson"\n[responses.y]\nat = "y"\n'
    fixed, free = (
        parse_plan(text, tmp_path / "plan.toml"),
        parse_plan('[responses.y]\nat = "y"\n', tmp_path / "plan.toml"),
    )
    assert reader_for("a.out", fixed).format == "ndjson"
    assert reader_for("A.JSON", free).format == "json"
    assert reader_for("a.log", free) is None, "text needs a pattern"
    assert reader_for("a.out", free) is None
    with pytest.raises(BadInput, match=r"landing\.format"):
        next(read_file(tmp_path / "a.out", free))
