"""However a file grew, what was taken equals one parse of it; 10,000 hostile files make no reader raise."""

import csv as csv_module
import io
import os
import pathlib
import tempfile

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from auditd.landing import Landing
from auditd.plan_reading import parse_plan
from auditd.read import READERS, Extent, Mapper, Raw, Readers, read_file
from auditd.records import Refusal, Run

PLAN = """
[landing]
paths = ["."]
[record]
started = "t"
[responses.y]
at = "y"
[factors]
a = "a"
"""
TEXT_PLAN = PLAN.replace('paths = ["."]', "paths = [\".\"]\npattern = 'y=(?P<y>\\S+) a=(?P<a>\\S+)'")


def plan_in(folder):
    return parse_plan(TEXT_PLAN, pathlib.Path(folder) / "plan.toml")


def read_all(path, plan):
    mapper = Mapper(plan)
    return [mapper.map(raw, path=pathlib.Path(path).name) for raw in read_file(path, plan)]


def told(items):
    """What of an item has to be equal however it was read."""
    return [
        (one.id, one.offset, one.number, one.digest)
        if isinstance(one, Run)
        else (one.offset, one.number, one.kind)
        for one in items
    ]


cells = st.text(st.characters(codec="utf-8", exclude_characters="\r\0"), max_size=6)


@st.composite
def csv_bytes(draw):
    out = io.StringIO()
    rows = csv_module.writer(
        out, delimiter=draw(st.sampled_from(",;\t|")), lineterminator=draw(st.sampled_from(["\n", "\r\n"]))
    )
    rows.writerow(["y", "a", "note"])
    for y, a, note in draw(st.lists(st.tuples(st.floats(allow_nan=False), cells, cells), max_size=12)):
        rows.writerow([y, a or "-", note])
    return out.getvalue().encode()


@st.composite
def ndjson_bytes(draw):
    line = st.one_of(
        st.builds(lambda y: b'{"y": %d, "a": "x"}' % y, st.integers(0, 99)),
        st.just(b'{"y": NaN, "a": 1}'),
        st.just(b""),
        st.just(b"{broken"),
        st.just('{"y": 1, "a": "ä\u2028"}'.encode()),
    )
    return b"".join(one + b"\n" for one in draw(st.lists(line, max_size=15)))


text_bytes = st.lists(
    st.sampled_from([b"y=1 a=b", b"noise", b"y=x a=b", b"", b"y=2.5 a=\xff"]), max_size=12
).map(lambda lines: b"".join(line + b"\n" for line in lines))


@given(st.data(), st.sampled_from(["x.ndjson", "x.csv", "x.log"]))
@settings(max_examples=120, deadline=None)
def test_random_appends_equal_one_parse(data, name):
    """A file written in pieces of any size, scanned after each, gives what one reading of the whole gives."""
    content = data.draw({"x.ndjson": ndjson_bytes(), "x.csv": csv_bytes(), "x.log": text_bytes}[name])
    cuts = sorted(data.draw(st.lists(st.integers(0, len(content)), max_size=8)))
    with tempfile.TemporaryDirectory() as folder:
        plan, path, items, now = plan_in(folder), os.path.join(folder, name), [], 2e9
        sources = {}
        landing = Landing(plan)
        for start, end in zip([0, *cuts], [*cuts, len(content)], strict=True):
            with open(path, "ab") as file:
                file.write(content[start:end])
            os.utime(path, ns=(int(now * 1e9), int(now * 1e9)))
            if data.draw(st.booleans()):
                landing = Landing(plan, sources.values())  # a restart between two pieces
            for batch in landing.scan(now):
                items += batch.items
                sources[batch.source.path] = batch.source
            now += 1
        whole = read_all(path, plan)
    assert told(items) == told([one for one in whole if getattr(one, "kind", "") != "file"])


@pytest.mark.slow
@given(st.binary(max_size=400), st.sampled_from([kind.suffixes[0] for kind in READERS]))
@settings(max_examples=4000, deadline=None)
def test_hostile_bytes_never_raise(place, content, suffix):
    """Any bytes under any suffix become runs or refusals."""
    expect_no_crash(place, content, suffix)


NASTY = st.sampled_from(
    [b'{"y":', b"1e400", b"NaN", b"Infinity", b"-", b'"', b"\\ud800", b"\\u0000", b"\xff", b"\xef\xbb\xbf",
     b"\0", b"{", b"}", b"[", b"]", b",", b"\n", b"\r", b"y=", b" a=", b"y,a\n", b'"__proto__":', b"null",
     b"true", b"1", b"PAR1", b"\xc3", b"[" * 70,
     b"9" * 400, b";", b"\t", b"|", b'{"y":1,"a":2}\n', b"2026-13-45T99:99:99Z", b'"t":', b"\x1b[31m"]
)  # fmt: skip


@pytest.mark.slow
@given(st.lists(NASTY, max_size=14).map(b"".join), st.sampled_from([kind.suffixes[0] for kind in READERS]))
@settings(max_examples=6000, deadline=None)
def test_hostile_tokens_never_raise(place, content, suffix):
    """Pieces that readers stumble over, in any order, become runs or refusals that a store can keep."""
    expect_no_crash(place, content, suffix)


@pytest.fixture(scope="module")
def place(tmp_path_factory):
    """Return a folder with its plan and mapper, used by every example."""
    folder = tmp_path_factory.mktemp("hostile")
    plan = plan_in(folder)
    return folder, plan, Mapper(plan)


def expect_no_crash(place, content, suffix):
    folder, plan, mapper = place
    path = folder / f"x{suffix}"
    path.write_bytes(content)
    for raw in read_file(path, plan):
        item = mapper.map(raw, path="x")
        assert isinstance(item, (Run, Refusal))
        text = (
            item.reason if isinstance(item, Refusal) else repr((item.id, item.cell, item.seed, item.metadata))
        )
        text.encode()  # no lone surrogate gets this far


@given(st.binary(max_size=200), st.sampled_from(READERS), st.integers(0, 250), st.booleans())
@settings(max_examples=300, deadline=None)
def test_a_reader_moves_on_or_says_why(place, content, kind, offset, final):
    """From any offset, even one that never was given, a reader ends; it never goes back before its offset."""
    folder, plan, _ = place
    path = folder / f"x{kind.suffixes[0]}"
    path.write_bytes(content)
    descriptor = os.open(path, os.O_RDONLY)
    try:
        offset = min(offset, len(content))
        extent = Extent(descriptor=descriptor, path="x", size=len(content), offset=offset, final=final)
        for portion in Readers(plan).of(str(path)).read(extent):
            assert portion.offset <= len(content)
            assert all(isinstance(item, (Raw, Refusal)) for item in portion.items)
    finally:
        os.close(descriptor)
