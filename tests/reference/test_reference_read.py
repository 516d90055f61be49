"""Reading checked against the standards' own examples, and against Python's csv and json modules."""

import csv
import io
import json
import random
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest

from auditd.errors import BadInput
from auditd.plan_reading import parse_plan
from auditd.read import Raw, read_file
from auditd.read.cells import cell_value
from auditd.read.json_text import NotJson, decode_json
from auditd.read.pointer import MISSING, parse_pointer, resolve
from auditd.read.times import parse_time

RFC6901_DOCUMENT = json.loads(
    r'{"foo": ["bar", "baz"], "": 0, "a/b": 1, "c%d": 2, "e^f": 3, "g|h": 4,'
    r' "i\\j": 5, "k\"l": 6, " ": 7, "m~n": 8}'
)
RFC6901_ANSWERS = [
    ("", RFC6901_DOCUMENT), ("/foo", ["bar", "baz"]), ("/foo/0", "bar"), ("/", 0), ("/a~1b", 1), ("/c%d", 2),
    ("/e^f", 3), ("/g|h", 4), ("/i\\j", 5), ('/k"l', 6), ("/ ", 7), ("/m~0n", 8),
]  # fmt: skip


@pytest.mark.parametrize(("pointer", "answer"), RFC6901_ANSWERS)
def test_pointers_of_rfc_6901_section_5(pointer, answer):
    """RFC 6901 (Bryan, Zyp & Nottingham 2013), section 5: every example pointer gives its value."""
    assert resolve(RFC6901_DOCUMENT, parse_pointer(pointer)) == answer


@pytest.mark.parametrize("pointer", ["/foo/2", "/foo/-", "/foo/01", "/nowhere", "/foo/0/deeper", "/foo/x"])
def test_pointers_to_nothing(pointer):
    """RFC 6901, section 4: no leading zeros, `-` is the element after the last, names must exist."""
    assert resolve(RFC6901_DOCUMENT, parse_pointer(pointer)) is MISSING


def test_order_of_unescaping():
    """RFC 6901, section 4: `~01` becomes `~1`, never `/`."""
    assert parse_pointer("/~01") == ("~1",)


@pytest.mark.parametrize("pointer", ["foo", "/a~", "/a~2"])
def test_malformed_pointers(pointer):
    """RFC 6901, section 3: a pointer begins with `/`, and `~` is followed by 0 or 1."""
    with pytest.raises(BadInput, match="6901"):
        parse_pointer(pointer)


# RFC 4180 (Shafranovich 2005), section 2; a header is put before each, since runs need names.
RFC4180 = [
    ("aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n", [["aaa", "bbb", "ccc"], ["zzz", "yyy", "xxx"]]),
    ("aaa,bbb,ccc\r\nzzz,yyy,xxx", [["aaa", "bbb", "ccc"], ["zzz", "yyy", "xxx"]]),
    ('"aaa","bbb","ccc"\r\nzzz,yyy,xxx', [["aaa", "bbb", "ccc"], ["zzz", "yyy", "xxx"]]),
    ('"aaa","b\r\nbb","ccc"\r\nzzz,yyy,xxx', [["aaa", "b\r\nbb", "ccc"], ["zzz", "yyy", "xxx"]]),
    ('"aaa","b""bb","ccc"', [["aaa", 'b"bb', "ccc"]]),
]


@pytest.mark.parametrize(("text", "rows"), RFC4180)
def test_tables_of_rfc_4180_section_2(tmp_path, text, rows):
    """RFC 4180, section 2, rules 1, 2, 5, 6 and 7: the examples give their fields."""
    path = tmp_path / "x.csv"
    path.write_bytes(("field_name,field_name_2,field_name_3\r\n" + text).encode())
    got = [list(raw.written.values()) for raw in read_file(path, plan_of(tmp_path))]
    assert got == rows


def plan_of(folder):
    return parse_plan('[responses.y]\nat = "y"\n', folder / "plan.toml")


@pytest.mark.parametrize(
    ("text", "meant"),
    [
        ("1985-04-12T23:20:50.52Z", datetime(1985, 4, 12, 23, 20, 50, 520000, tzinfo=UTC)),
        ("1996-12-19T16:39:57-08:00", datetime(1996, 12, 20, 0, 39, 57, tzinfo=UTC)),
        ("1990-12-31T23:59:60Z", datetime(1991, 1, 1, tzinfo=UTC)),
        ("1990-12-31T15:59:60-08:00", datetime(1991, 1, 1, tzinfo=UTC)),
        ("1937-01-01T12:00:27.87+00:20", datetime(1937, 1, 1, 11, 40, 27, 870000, tzinfo=UTC)),
    ],
)
def test_times_of_rfc_3339_section_5_8(text, meant):
    """RFC 3339 (Klyne & Newman 2002), section 5.8: every example, the leap second as the second after it."""
    assert parse_time(text, None) == meant
    assert parse_time(text.lower(), None) == meant  # section 5.6: T and Z may be lower case


def test_repeated_hour_of_a_zone():
    """The first of the two is meant: on 2025-10-26 Berlin showed 02:30 at 00:30Z and 01:30Z (IANA data)."""
    berlin = ZoneInfo("Europe/Berlin")
    assert parse_time("2025-10-26T02:30:00", berlin) == datetime(2025, 10, 26, 0, 30, tzinfo=UTC)
    assert parse_time("2025-10-26T02:30:00+01:00", berlin) == datetime(2025, 10, 26, 1, 30, tzinfo=UTC)


@pytest.mark.parametrize("scale", [1, 1_000, 1_000_000, 1_000_000_000])
def test_posix_numbers(scale):
    """Seconds, milli-, micro- and nanoseconds of one moment are one moment, as datetime counts it."""
    moment = datetime(2026, 3, 1, 12, tzinfo=UTC)
    assert abs(parse_time(int(moment.timestamp()) * scale, None) - moment) < timedelta(milliseconds=1)


@pytest.mark.parametrize(
    "value", ["2026-03-01T12:00:00", "2026-02-30T00:00:00Z", "soon", True, None, [], float("nan"), 1e300, ""]
)
def test_times_that_are_none(value):
    """No offset without a zone, no such day, no time at all: refused with a reason."""
    with pytest.raises(BadInput, match=r"."):
        parse_time(value, None)


def test_json_values_against_the_json_module():
    """3,000 random documents, written by json in its three styles, are read as json reads them."""
    rng = random.Random(20)

    def value(depth):
        kinds = [
            rng.random,
            lambda: rng.randrange(-(10**30), 10**30),
            lambda: None,
            lambda: True,
            lambda: 'ä"\\\n\u2028😀',
        ]
        if depth:
            kinds += [
                lambda: [value(depth - 1) for _ in range(3)],
                lambda: {str(rng.random()): value(depth - 1) for _ in range(3)},
            ]
            kinds += [lambda: rng.choice([float("inf"), -float("inf")])]
        return rng.choice(kinds)()

    for _ in range(3000):
        text = json.dumps(value(3), ensure_ascii=rng.random() < 0.5, indent=rng.choice([None, 1]))
        assert decode_json(text.encode()) == json.loads(text)


def test_nan_is_read():
    """The json module writes NaN bare; RFC 8259, section 6, has no such token; it is read all the same."""
    read = decode_json(json.dumps({"y": float("nan"), "z": [float("inf")]}).encode())
    assert read["y"] != read["y"]
    assert read["z"] == [float("inf")]


@pytest.mark.parametrize(
    "text",
    [
        "1e400",
        "-1e400",
        "[NaN, 1e400]",
        "nan",
        "Inf",
        "01",
        "+1",
        ".5",
        "1.",
        "'a'",
        "{a:1}",
        "[1,]",
        '"\\ud800"',
        '"\x01"',
    ],
)
def test_json_that_is_none(text):
    """RFC 8259, sections 6 and 7: number and string grammar; and what a double or UTF-8 cannot hold."""
    with pytest.raises(NotJson):
        decode_json(text.encode())


@pytest.mark.parametrize(
    "text", ["0", "-0", "12", "1.5", "1e3", "-1.25E-7", "123456789012345678901234567890"]
)
def test_cells_that_are_json_numbers(text):
    """RFC 8259, section 6: a cell that json reads as a number is that number."""
    assert cell_value(text) == json.loads(text)


@pytest.mark.parametrize(
    "text", ["007", "+1", "1.", ".5", "1e400", "0x1f", "1_000", "NaN", " 1", "١", "1" * 5000]
)
def test_cells_that_stay_texts(text):
    """What is no JSON number, or none that a double holds, stays as written."""
    assert cell_value(text) == text


def test_tables_against_the_csv_module(tmp_path):
    """300 random tables in eight dialects, written by csv, give the rows that csv reads back."""
    rng = random.Random(21)
    pieces = ["a", "ä", '"', "\n", "\r\n", ",", ";", "\t", "|", " ", "1.5", ""]
    for trial in range(300):
        rows = [
            ["".join(rng.choices(pieces, k=rng.randrange(5))) for _ in range(3)]
            for _ in range(rng.randrange(6))
        ]
        out = io.StringIO()
        delimiter, end = rng.choice(",;\t|"), rng.choice(["\n", "\r\n"])
        writer = csv.writer(
            out,
            delimiter=delimiter,
            lineterminator=end,
            quoting=rng.choice([csv.QUOTE_MINIMAL, csv.QUOTE_ALL]),
        )
        writer.writerows([["p", "q", "r"], *rows])
        path = tmp_path / f"{trial}.csv"
        path.write_bytes(rng.choice([b"", b"\xef\xbb\xbf"]) + out.getvalue().encode())
        back = list(csv.reader(io.StringIO(out.getvalue(), newline=""), delimiter=delimiter))[1:]
        got = [raw.written for raw in read_file(path, plan_of(tmp_path))]
        assert got == [{name: cell for name, cell in zip("pqr", row, strict=True) if cell} for row in back]


def test_lines_against_the_json_module(tmp_path):
    """NDJSON of 2,000 records is what json reads line by line, at the offsets that str.find gives."""
    rng = random.Random(22)
    lines = [
        json.dumps({"n": n, "y": rng.random(), "t": "x" * rng.randrange(50)}).encode() for n in range(2000)
    ]
    content = b"\n".join(lines) + b"\n"
    (tmp_path / "x.ndjson").write_bytes(content)
    for raw, line in zip(read_file(tmp_path / "x.ndjson", plan_of(tmp_path)), lines, strict=True):
        assert isinstance(raw, Raw)
        assert raw.value == json.loads(line)
        assert content[raw.offset : raw.offset + len(line)] == line
