"""What the mapper makes of a record, rule by rule."""

import json
import math
import re

import pytest

from auditd.plan_reading import parse_plan
from auditd.read import Mapper, Raw
from auditd.records import NOT_STATED, Refusal, Run

PLAN = """
[record]
id = "/id"
sequence = "/seq"
started = "/t/start"
finished = "/t/end"
seed = "/rng/seed"
parent = "/restart_of"
status = "/status"
completed = ["ok", "0"]
[responses.error]
at = "/out/error"
[responses.mass]
at = "mass"
[factors]
solver = "/cfg/solver"
mesh = "/cfg/mesh/0"
[nuisance]
host = "/env/host"
day = {from = "started", by = "day"}
week = {from = "started", by = "week"}
hour = {from = "finished", by = "hour"}
[design]
stage = "/stage"
"""
RECORD = {
    "id": "r1", "seq": 7,
    "t": {"start": "2026-01-01T00:30:00+02:00", "end": "2026-01-01T01:00:00+02:00", "zone": "x"},
    "rng": {"seed": 2**127 + 1}, "restart_of": "r0", "status": "ok", "out": {"error": 0.25}, "mass": 3,
    "cfg": {"solver": "implicit", "mesh": [1.0, 2]}, "env": {"host": "n1"}, "stage": 2, "note": {"by": ["a"]},
}  # fmt: skip


@pytest.fixture
def mapper(tmp_path):
    return Mapper(parse_plan(PLAN, tmp_path / "plan.toml"))


def raw(changes=(), *, drop=(), written=None):
    """The record with pointers changed or dropped."""
    record = json.loads(json.dumps(RECORD))
    for pointer, value in [*dict(changes).items(), *((pointer, None) for pointer in drop)]:
        *path, last = pointer.split(".")
        place = record
        for name in path:
            place = place[name]
        if pointer in drop:
            del place[last]
        else:
            place[last] = value
    return Raw(value=record, offset=100, number=3, written=written)


def test_a_whole_record(mapper):
    """Every field of the plan lands where the run has it, and the rest is metadata."""
    run = mapper.map(raw(), path="a.json")
    assert isinstance(run, Run)
    assert (run.id, run.path, run.offset, run.number, run.sequence) == ("r1", "a.json", 100, 3, 7)
    assert (run.seed, run.parent, run.status, run.stage) == (str(2**127 + 1), "r0", "ok", "2")
    assert run.started.isoformat() == "2025-12-31T22:30:00+00:00"
    assert run.cell == {"solver": "implicit", "mesh": 1}
    assert type(run.cell["mesh"]) is int
    assert run.nuisance == {"host": "n1", "day": "2025-12-31", "week": "2026-W01", "hour": "2025-12-31T23"}
    assert run.responses == {"error": 0.25, "mass": 3.0, "duration": 1800.0, "completed": 1.0}
    assert run.metadata == {"t": {"zone": "x"}, "cfg": {"mesh": [1.0, 2]}, "note": {"by": ["a"]}}


@pytest.mark.parametrize(
    ("changes", "reason"),
    [
        ({"out.error": None}, "response error is missing"),
        ({"out.error": "0.5"}, 'response error is not a number: "0.5"'),
        ({"out.error": True}, "response error is not a number"),
        ({"out.error": [1]}, "response error is not a number"),
        ({"mass": 10**400}, "beyond the range of a double"),
        ({"out": 3}, "response error is missing"),
        ({"cfg.mesh": []}, "factor mesh is missing"),
        ({"cfg.mesh": [math.nan]}, "mesh is nan"),
        ({"cfg.solver": "x" * 5000}, "solver has 5000 characters"),
        ({"id": None}, "the id is missing"),
        ({"id": ""}, "the id is missing"),
        ({"seq": 1.5}, "sequence is not an integer"),
        ({"seq": "7"}, "sequence is not an integer"),
        ({"seq": 2**63}, "sequence is not an integer"),
        ({"t.start": "2026-01-01T00:30:00"}, "started: .* has no offset"),
        ({"t.end": "yesterday"}, "finished: .* is not a time"),
        ({"note": "a\0b"}, "NUL"),
        ({"note": {"a\0": 1}}, "NUL"),
    ],
)
def test_what_is_refused_and_why(mapper, changes, reason):
    """Each is a refusal that names the field, with the record's place and its id where it has one."""
    refusal = mapper.map(raw(changes), path="a.json")
    assert isinstance(refusal, Refusal)
    assert (refusal.kind, refusal.path, refusal.offset, refusal.number) == ("mapping", "a.json", 100, 3)
    assert refusal.id == (RECORD["id"] if "id" not in changes else changes["id"])
    assert re.search(reason, refusal.reason)


def test_a_run_that_is_not_completed_may_lack_responses(mapper):
    """With another status missing responses are left out, those that stand are kept; a factor must stand."""
    run = mapper.map(raw({"status": "crashed", "out.error": "nothing"}), path="a")
    assert not run.completed
    assert run.responses == {"mass": 3.0, "duration": 1800.0, "completed": 0.0}
    assert isinstance(mapper.map(raw({"status": "crashed"}, drop=["cfg.solver"]), path="a"), Refusal)
    assert not mapper.map(raw(drop=["status"]), path="a").completed
    assert mapper.map(raw({"status": 0}), path="a").completed


def test_missing_circumstances(mapper):
    """A missing or null nuisance is the level (not stated); so is one derived from a missing time."""
    run = mapper.map(raw({"env.host": None}, drop=["t"]), path="a")
    assert run.nuisance == dict.fromkeys(("host", "day", "week", "hour"), NOT_STATED)
    assert run.started is run.finished is None
    assert "duration" not in run.responses


def test_null_is_a_level_of_a_factor(mapper):
    """`preconditioner: null` is a choice; 1 and 1.0 are one level, "1" another, a list its JSON text."""
    levels = [
        mapper.map(raw({"cfg.solver": value}), path="a").cell["solver"]
        for value in (None, 1, 1.0, "1", [1, "a"])
    ]
    assert levels == [None, 1, 1, "1", '[1,"a"]']


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_nan_and_infinities_are_kept(mapper, value):
    """A response that is NaN or infinite stays so."""
    assert repr(mapper.map(raw({"mass": value}), path="a").responses["mass"]) == repr(value)


def test_digests_tell_content_not_order(mapper):
    """The order of names changes nothing; any value does, also NaN against infinity against null."""
    shuffled = Raw(value=dict(reversed(RECORD.items())), offset=0, number=0)
    assert mapper.map(shuffled, path="b").digest == mapper.map(raw(), path="a").digest
    others = [raw({"note": value}) for value in (math.nan, math.inf, None, "null", 0, "0")]
    digests = {mapper.map(one, path="a").digest for one in others}
    assert len(digests) == len(others)
    assert {len(digest) for digest in digests} == {16}


def test_default_ids(tmp_path):
    """Without record.id a run is known by its path and number; a later file under its path adds its turn."""
    mapper = Mapper(parse_plan('[responses.y]\nat = "y"\n', tmp_path / "plan.toml"))
    one = Raw(value={"y": 1}, offset=0, number=4)
    assert mapper.map(one, path="a/b.ndjson").id == "a/b.ndjson#4"
    assert mapper.map(one, path="a/b.ndjson", generation=2).id == "a/b.ndjson~2#4"
    assert mapper.map(one, path="a").completed
    assert mapper.map(one, path="a").responses == {"y": 1.0}


def test_texts_as_written_serve_as_ids(tmp_path):
    """In a table, `0.10` and `0.1` are two ids, a seed of 40 digits keeps them all."""
    mapper = Mapper(
        parse_plan('[record]\nid = "id"\nseed = "s"\n[responses.y]\nat = "y"\n', tmp_path / "plan.toml")
    )

    def row(**cells):
        from auditd.read.cells import cell_value

        return Raw(
            value={name: cell_value(text) for name, text in cells.items()}, offset=0, number=0, written=cells
        )

    run = mapper.map(row(id="0.10", s="1" * 40, y="1."), path="a")
    assert (run.id, run.seed, run.responses["y"]) == ("0.10", "1" * 40, 1.0)
    assert math.isnan(mapper.map(row(id="a", y="NaN"), path="a").responses["y"])
    assert mapper.map(row(id="a", y="-inf"), path="a").responses["y"] == -math.inf
    for text in ("1e400", "1,5", "1_0", "one", "0x1"):
        assert isinstance(mapper.map(row(id="a", y=text), path="a"), Refusal), text


def test_naive_times_need_a_zone(tmp_path):
    """With record.zone a time without offset is taken in it, and days are that zone's days."""
    text = '[record]\nstarted = "t"\nzone = "Asia/Tokyo"\n[responses.y]\nat = "y"\n'
    text += '[nuisance]\nday = {from = "started", by = "day"}\n'
    run = Mapper(parse_plan(text, tmp_path / "plan.toml")).map(
        Raw(value={"y": 1, "t": "2026-03-01 08:00"}, offset=0, number=0), path="a"
    )
    assert run.started.isoformat() == "2026-02-28T23:00:00+00:00"
    assert run.nuisance["day"] == "2026-03-01"


def test_nothing_raises_past_the_mapper(mapper):
    """A value that no rule foresaw is a refusal that says so."""
    unforeseen = Raw(value={**RECORD, "note": object()}, offset=0, number=0)
    assert "cannot be mapped" in mapper.map(unforeseen, path="a").reason
