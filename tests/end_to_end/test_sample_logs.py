"""The committed sample logs are what their generator makes, and are what their lists say."""

import csv
import io
import itertools
import json
import pathlib

import pytest

from auditd.plan_reading import load_plan
from auditd.simulate.playback import land_piece, pieces
from auditd.simulate.sample_logs import sample_logs

SAMPLE = pathlib.Path(__file__).parents[2] / "sample_logs"
MAX_BYTES = 3_000_000
FAULTS = {"lone configuration", "ignored seed", "build shift", "drifting host", "cache", "failures"}
EDITIONS = ("faulty", "clean")


def read_records(path):
    """Read a result file with the standard library's own readers."""
    if path.suffix == ".csv":
        return list(csv.DictReader(io.StringIO(path.read_text(encoding="utf-8"), newline="")))
    if path.suffix == ".ndjson":
        return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]
    return json.loads(path.read_bytes())


def edition_records(edition):
    files = [path for path in (SAMPLE / edition / "results").rglob("*") if path.is_file()]
    records = [record for path in files for record in read_records(path)]
    return sorted(records, key=lambda record: record["started"])


def response_triples(records):
    return [
        tuple(float(record[name]) for name in ("peak_tension", "offset", "fatigue"))
        for record in records
        if record["status"] == "ok"
    ]


@pytest.fixture(scope="module")
def planted():
    return json.loads((SAMPLE / "planted.json").read_bytes())


@pytest.fixture(scope="module")
def faulty():
    return edition_records("faulty")


@pytest.fixture(scope="module")
def clean():
    return edition_records("clean")


def test_committed_files_equal_what_the_generator_makes():
    made = sample_logs()
    found = {
        path.relative_to(SAMPLE).as_posix(): path.read_bytes() for path in SAMPLE.rglob("*") if path.is_file()
    }
    assert sorted(found) == sorted(made)
    assert [name for name in made if made[name] != found[name]] == []
    assert sum(map(len, found.values())) <= MAX_BYTES


@pytest.mark.parametrize("edition", EDITIONS)
def test_each_edition_has_1200_runs_on_five_hosts_in_three_formats(edition):
    suffixes = {path.suffix for path in (SAMPLE / edition / "results").rglob("*") if path.is_file()}
    records = edition_records(edition)
    assert suffixes == {".ndjson", ".json", ".csv"}
    assert len(records) >= 1200
    assert len({record["host"] for record in records}) == 5
    assert [record["run"] for record in records] == [f"k{i + 1:04d}" for i in range(len(records))]


@pytest.mark.parametrize("edition", EDITIONS)
def test_plans_are_valid_and_name_fields_that_the_records_have(edition):
    plan = load_plan(SAMPLE / edition / "plan.toml")
    record = next(record for record in edition_records(edition) if record["status"] == "ok")
    named = [plan.record.id, plan.record.started, plan.record.finished, plan.record.seed, plan.record.status]
    named += [response.at for response in plan.responses.values()]
    assert set(named) | set(plan.factors.values()) | set(plan.nuisance.values()) <= set(record)


@pytest.mark.parametrize("edition", EDITIONS)
def test_seeds_are_distinct_and_hosts_run_one_run_at_a_time(edition):
    records = edition_records(edition)
    assert len({record["seed"] for record in records}) == len(records)
    for host in {record["host"] for record in records}:
        own = [record for record in records if record["host"] == host]
        assert all(a["finished"] < b["started"] for a, b in itertools.pairwise(own))
        assert all(record["started"] < record["finished"] for record in own)


def test_planted_list_names_existing_runs_of_the_right_level(planted, faulty):
    assert {fault["name"] for fault in planted["faulty"]["faults"]} == FAULTS
    assert planted["faulty"]["runs"] == len(faulty)
    assert planted["clean"]["faults"] == []
    for fault in planted["faulty"]["faults"]:
        record = faulty[fault["index"]]
        assert record["run"] == fault["run"]
        assert fault["seen_from"] >= fault["index"]
        if fault["along"] is not None:
            assert record[fault["along"]] == fault["level"]
        if fault["cells"]:
            assert f"anchor={record['anchor']} mesh={record['mesh']}" in fault["cells"]


def test_lone_configuration_is_aliased_with_its_host_only_in_the_faulty_edition(faulty, clean):
    assert {record["host"] for record in faulty if record["mesh"] == "fine"} == {"teal"}
    assert {record["mesh"] for record in faulty if record["host"] == "teal"} == {"fine"}
    pairs = [(record["host"], record["anchor"], record["mesh"]) for record in clean]
    assert len({pairs.count(pair) for pair in set(pairs)}) == 1
    assert len(set(pairs)) == 30


def test_repeated_results_are_the_ignored_seed_and_the_cache_and_none_in_the_clean_edition(faulty, clean):
    ignored = [r for r in faulty if (r["anchor"], r["mesh"]) == ("twin", "coarse")]
    others = [r for r in faulty if r not in ignored]
    assert len(set(response_triples(ignored))) == 1
    n_repeats = len(response_triples(others)) - len(set(response_triples(others)))
    assert 9 <= n_repeats <= 12
    assert len(set(response_triples(clean))) == len(response_triples(clean))


def test_failures_stand_together_only_in_the_faulty_edition(faulty, clean):
    failed = [i for i, record in enumerate(faulty) if record["status"] != "ok"]
    spell = [i for i in failed if i >= 1200]
    assert len(spell) > 30
    assert max(spell) - min(spell) < 250
    assert 0 < sum(record["status"] != "ok" for record in clean) < 20


@pytest.mark.parametrize("edition", EDITIONS)
def test_pieces_landed_in_turn_give_the_committed_files(edition, tmp_path):
    played = pieces(SAMPLE / edition)
    assert 25 <= len(played) <= 40
    assert [piece.until for piece in played] == sorted(piece.until for piece in played)
    for piece in played:
        land_piece(piece, tmp_path)
    for path in (SAMPLE / edition / "results").rglob("*"):
        if path.is_file():
            assert (tmp_path / path.relative_to(SAMPLE / edition)).read_bytes() == path.read_bytes()
    landed = [path for path in tmp_path.rglob("*") if path.is_file()]
    assert sum(len(read_records(path)) for path in landed) == sum(piece.n_runs for piece in played)


@pytest.mark.parametrize("edition", EDITIONS)
def test_no_run_lands_later_than_the_plans_patience_of_12_hours(edition, faulty, clean):
    from datetime import datetime, timedelta

    started = {r["run"]: datetime.fromisoformat(r["started"]) for r in (faulty, clean)[edition == "clean"]}
    for piece in pieces(SAMPLE / edition):
        until = datetime.fromtimestamp(piece.until, tz=started["k0001"].tzinfo)
        text = b"".join(part.content for part in piece.parts).decode()
        landed = [run for run in started if run in text]
        assert landed
        assert until - min(started[run] for run in landed) < timedelta(hours=12)
