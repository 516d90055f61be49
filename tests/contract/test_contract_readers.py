"""One suite over every reader of the registry: a new one is tested the day it appears."""

import csv
import io
import json
import math
import os

import pytest

from auditd.plan_reading import parse_plan
from auditd.read import READERS, Extent, Mapper, Raw, Readers, read_file, reader_for
from auditd.records import Run

PATTERN = "y=(?P<y>\\\\S+) id=(?P<id>\\\\S+) c=(?P<c>\\\\S+)(?: n=(?P<n>\\\\S+))?"
PLAN = f"""
[landing]
pattern = "{PATTERN}"
[record]
id = "id"
[responses.y]
at = "y"
[factors]
c = "c"
[nuisance]
n = "n"
"""
RECORDS = [{"y": 0.5 + k, "id": f"r{k}", "c": "a", "n": f"n{k % 3}"} for k in range(25)]


def as_csv(records):
    out = io.StringIO()
    rows = csv.DictWriter(out, ["y", "id", "c", "n"])
    rows.writeheader()
    rows.writerows(records)
    return out.getvalue().encode()


def as_parquet(records):
    import pyarrow as pa
    from pyarrow import parquet

    out = io.BytesIO()
    parquet.write_table(pa.Table.from_pylist(records), out)
    return out.getvalue()


WRITERS = {
    "json": lambda records: json.dumps(records).encode(),
    "ndjson": lambda records: b"".join(json.dumps(one).encode() + b"\n" for one in records),
    "csv": as_csv,
    "text": lambda records: b"".join(
        f"run y={r['y']} id={r['id']} c={r['c']} n={r['n']}\n".encode() for r in records
    ),
    "parquet": as_parquet,
}


@pytest.fixture(params=READERS, ids=lambda kind: kind.format)
def kind(request):
    return request.param


@pytest.fixture
def plan(tmp_path):
    return parse_plan(PLAN, tmp_path / "plan.toml")


@pytest.fixture
def landed(kind, plan, tmp_path):
    """Return a function that writes bytes under the format's name and returns the path."""

    def write(content):
        path = tmp_path / f"x{kind.suffixes[0]}"
        path.write_bytes(content)
        return path

    return write


def portions(path, plan, **extent):
    descriptor = os.open(path, os.O_RDONLY)
    try:
        extent = {"size": os.path.getsize(path), **extent}
        return list(reader_for(str(path), plan).read(Extent(descriptor=descriptor, path="x", **extent)))
    finally:
        os.close(descriptor)


def test_every_format_of_the_plan_has_a_reader(plan):
    """The registry covers the plan's formats, each once, and their suffixes do not collide."""
    assert sorted(one.format for one in READERS) == ["csv", "json", "ndjson", "parquet", "text"]
    suffixes = [suffix for one in READERS for suffix in one.suffixes]
    assert len(set(suffixes)) == len(suffixes)
    assert Readers(plan).suffixes == set(suffixes)


def test_records_come_back_as_runs(kind, plan, landed):
    """Twenty-five runs written come back as the same runs, numbered from 0."""
    path = landed(WRITERS[kind.format](RECORDS))
    runs = [Mapper(plan).map(raw, path="x") for raw in read_file(path, plan)]
    assert all(isinstance(run, Run) for run in runs)
    told = [(run.number, run.id, run.responses["y"], run.cell, run.nuisance) for run in runs]
    assert told == [(k, r["id"], r["y"], {"c": "a"}, {"n": r["n"]}) for k, r in enumerate(RECORDS)]


def test_offsets_identify_records(kind, plan, landed):
    """Offsets rise strictly; those of lines are where the record stands, those of documents its number."""
    path = landed(WRITERS[kind.format](RECORDS))
    raws = list(read_file(path, plan))
    offsets = [raw.offset for raw in raws]
    assert offsets == sorted(set(offsets))
    if kind.shape == "document":
        assert offsets == list(range(len(RECORDS)))
    else:
        content = path.read_bytes()
        assert all(raw.value["id"].encode() in content[raw.offset :].split(b"\n", 1)[0] for raw in raws)


def test_reading_goes_on_after_any_portion(kind, plan, landed, monkeypatch):
    """With portions of four records, going on from each portion's word gives what one reading gives."""
    module = __import__(kind.__module__, fromlist=["x"])
    for name in (module, __import__("auditd.read.csv_walk", fromlist=["x"])):
        if hasattr(name, "MAX_PORTION_RECORDS"):
            monkeypatch.setattr(name, "MAX_PORTION_RECORDS", 4)
    path = landed(WRITERS[kind.format](RECORDS))
    whole = [raw.value["id"] for portion in portions(path, plan) for raw in portion.items]
    got, at = [], {}
    for _ in range(30):
        first = portions(path, plan, **at)[0]
        got += [raw.value["id"] for raw in first.items]
        at = {"offset": first.offset, "number": first.number, "context": first.context}
        if first.offset == path.stat().st_size:
            break
    assert got == whole == [r["id"] for r in RECORDS]


def test_half_a_file_is_no_whole_one(kind, plan, landed):
    """Cut anywhere, a document waits or is refused; lines give only records that the whole has too."""
    whole = WRITERS[kind.format](RECORDS[:3])
    everything = [raw.value for raw in read_file(landed(whole), plan)]
    for cut in range(len(whole)):
        path = landed(whole[:cut])
        got = portions(path, plan)
        values = [raw.value for portion in got for raw in portion.items]
        assert values == everything[: len(values)]
        if kind.shape == "document":
            assert not values
            assert got[-1].waits, f"cut at {cut}"
            assert not got[-1].failed


def test_an_empty_file_waits_or_gives_nothing(kind, plan, landed):
    """Nothing is no run."""
    (portion,) = portions(landed(b""), plan)
    assert not portion.items
    assert portion.waits or kind.shape == "lines"


def test_garbage_is_refused_with_a_reason(kind, plan, landed):
    """Bytes of another kind give a refusal with a reason; free text that does not match gives nothing."""
    items = list(read_file(landed(b"\x80\x81 garbage, \x00 not a record\n\xff,\n"), plan))
    assert all(item.reason for item in items)
    assert items or kind.format == "text"


def test_infinite_and_missing_numbers(kind, plan, landed):
    """NaN and infinities are kept as such in every format; a missing response is a refusal."""
    records = [{**RECORDS[0], "y": math.nan}, {**RECORDS[1], "y": -math.inf}]
    runs = [Mapper(plan).map(raw, path="x") for raw in read_file(landed(WRITERS[kind.format](records)), plan)]
    assert math.isnan(runs[0].responses["y"])
    assert runs[1].responses["y"] == -math.inf


def test_nothing_is_changed_by_reading(kind, plan, landed):
    """Mapping a record does not change it, so that it can be mapped again (rotation)."""
    raws = list(read_file(landed(WRITERS[kind.format](RECORDS[:3])), plan))
    before = [json.dumps(raw.value) for raw in raws]
    once = [Mapper(plan).map(raw, path="x") for raw in raws]
    assert [json.dumps(raw.value) for raw in raws] == before
    assert once == [Mapper(plan).map(raw, path="x") for raw in raws]
    assert all(isinstance(raw, Raw) for raw in raws)
