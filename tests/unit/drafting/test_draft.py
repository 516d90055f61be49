"""A first plan from what has landed: columns told by values, reasons given, and the plan works unedited."""

import json
import pathlib
import shutil

import numpy as np
import pytest
from campaigns_made import records, runaudit

from auditd.drafting.column import words_of
from auditd.drafting.toml_text import names_for
from auditd.errors import BadInput
from auditd.pipeline.drafting import draft
from auditd.plan_reading import parse_plan

SAMPLE = pathlib.Path(__file__).parents[3] / "sample_logs"


def drafted(folder, files):
    """Lay out files by name and draft a plan for them."""
    landing = folder / "results"
    landing.mkdir()
    for name, text in files.items():
        (landing / name).write_text(text)
    made = draft(landing, folder)
    return parse_plan(made.text, folder / "plan.toml"), made


def lines(found):
    return "".join(json.dumps(record) + "\n" for record in found)


def test_the_sample_is_drafted_as_its_own_plan_says(tmp_path):
    """From values: the same record, responses, factors, nuisances and machines as the committed plan."""
    shutil.copytree(SAMPLE / "faulty" / "results", tmp_path / "results")
    made = draft(tmp_path / "results", tmp_path)
    plan = parse_plan(made.text, tmp_path / "plan.toml")
    stated = parse_plan((SAMPLE / "faulty" / "plan.toml").read_text())
    assert plan.record == stated.record
    assert {name: one.scale for name, one in plan.responses.items()} == {
        name: one.scale for name, one in stated.responses.items()
    }
    assert plan.factors == stated.factors
    assert plan.nuisance == stated.nuisance
    assert plan.machines.exclusive == stated.machines.exclusive
    assert plan.order.by == "started"
    assert made.n_refused == 0
    assert made.n_records == 1426


@pytest.mark.slow
def test_planted_faults_are_found_under_a_drafted_plan_without_an_edit(tmp_path):
    """Draft on the sample, gather under it: every planted fault is named by a warning, as in the demo."""
    from auditd.pipeline.demonstration import _sum_up

    shutil.copytree(SAMPLE / "faulty" / "results", tmp_path / "results")
    plan = tmp_path / "plan.toml"
    made = runaudit(plan, "draft", str(tmp_path / "results"), "-o", str(plan))
    assert made.returncode == 0, made.stderr
    assert runaudit(plan, "gather", env={"RUNAUDIT_KEY": "6b656c70"}).returncode == 0
    shown = _sum_up("faulty", SAMPLE, tmp_path, 1426)
    assert [one.name for one in shown.planted if one.found is None] == []
    assert len(shown.planted) == 6


def test_nested_records_are_gone_into(tmp_path):
    """Objects within objects are told apart as pointers; environment and settings by where they stand too."""
    plan, made = drafted(tmp_path, {"a.ndjson": lines(records(200, seed=1, failing=(3, 50)))})
    assert plan.record.id == "id"
    assert (plan.record.started, plan.record.finished) == ("/time/start", "/time/end")
    assert plan.record.seed == "seed"
    assert plan.record.completed == ["ok"]
    assert {one.at for one in plan.responses.values()} == {"/out/energy", "/out/steps"}
    assert plan.responses["steps"].scale == "log"
    assert plan.responses["energy"].scale == "linear"
    assert plan.factors == {"scheme": "/cfg/scheme"}
    assert plan.nuisance == {"host": "/env/host"}
    assert made.n_refused == 0


def test_reasons_and_questions_are_comments(tmp_path):
    """Every judgement has its reason, and what only the operator knows is asked."""
    _, made = drafted(tmp_path, {"a.ndjson": lines(records(100))})
    for asked in (
        "alarm budget",
        "smallest difference that matters",
        "which comparisons do you intend",
        "on purpose",
    ):
        assert any("ASK" in line and asked.split()[0] in line for line in made.text.splitlines()), asked
    assert "named as a circumstance" in made.text
    assert "never later than" in made.text


def test_mixed_formats_make_one_plan(tmp_path):
    """CSV beside JSON and NDJSON of the same keys: one plan, one pattern a suffix, numbers as numbers."""
    flat = [
        {
            "run": f"k{k}",
            "seed": k * 7919 + 2**40,
            "host": f"n{k % 3}",
            "mode": "ab"[k % 2],
            "y": k % 7 + 0.25 * (k % 31),
        }
        for k in range(120)
    ]
    table = "run,seed,host,mode,y\n" + "".join(
        ",".join(str(value) for value in one.values()) + "\n" for one in flat[:40]
    )
    plan, made = drafted(
        tmp_path, {"a.csv": table, "b.json": json.dumps(flat[40:80]), "c.ndjson": lines(flat[80:])}
    )
    assert plan.landing.match == ["*.csv", "*.json", "*.ndjson"]
    assert plan.record.id == "run"
    assert plan.record.seed == "seed"
    assert list(plan.responses) == ["y"]
    assert plan.factors == {"mode": "mode"}
    assert plan.nuisance == {"host": "host"}
    assert made.n_refused == 0


def test_text_lines_get_a_pattern(tmp_path):
    """Lines of name=value become a pattern with named groups, under which all lines are taken."""
    rng = np.random.default_rng(1)
    text = "".join(f"run={k} host=n{k % 3} mode={'ab'[k % 2]} loss={rng.normal():.6f}\n" for k in range(60))
    plan, made = drafted(tmp_path, {"log.txt": text})
    assert plan.landing.format == "text"
    assert list(plan.responses) == ["loss"]
    assert plan.nuisance == {"host": "host"}
    assert made.n_refused == 0


def test_parquet_is_read(tmp_path):
    """A Parquet table is judged by its columns."""
    pa = pytest.importorskip("pyarrow")
    from pyarrow import parquet

    (tmp_path / "results").mkdir()
    rng = np.random.default_rng(1)
    table = pa.table(
        {
            "id": [f"r{k}" for k in range(50)],
            "host": [f"n{k % 2}" for k in range(50)],
            "y": rng.normal(size=50),
        }
    )
    parquet.write_table(table, tmp_path / "results" / "a.parquet")
    plan = parse_plan(draft(tmp_path / "results", tmp_path).text)
    assert (plan.record.id, list(plan.responses), list(plan.nuisance)) == ("id", ["y"], ["host"])


def flat(n=120, **columns):
    rng = np.random.default_rng(3)
    return [
        {"id": f"r{k}", "y": float(rng.normal())} | {name: make(k) for name, make in columns.items()}
        for k in range(n)
    ]


@pytest.mark.parametrize(
    ("name", "make", "where"),
    [
        ("alpha", lambda k: [0.1, 0.5, 0.9][k % 3], "factors"),
        ("variant", lambda k: "abc"[k % 3], "factors"),
        ("thing", lambda k: f"v1.{k // 40}.0", "nuisance"),
        ("thing", lambda k: "abc"[k // 40], "nuisance"),
        ("thing", lambda k: ["n1", "n2", "n3"][k % 3], "nuisance"),
        ("thing", lambda k: ["3f2a91c", "9b1e77d"][k % 2], "nuisance"),
    ],
)
def test_values_tell_settings_from_circumstances(tmp_path, name, make, where):
    """Crossed values are factors; versions, hashes, machines and what changes with time are nuisances."""
    plan, _ = drafted(tmp_path, {"a.ndjson": lines(flat(**{name: make}))})
    assert name in getattr(plan, where)


def test_a_setting_that_some_records_lack_is_no_factor(tmp_path):
    """A missing factor would refuse the record, so the column stands under nuisance, with the reason."""
    found = flat(mode=lambda k: "ab"[k % 2])
    del found[5]["mode"]
    plan, made = drafted(tmp_path, {"a.ndjson": lines(found)})
    assert "mode" in plan.nuisance
    assert "a factor that is missing is a refusal" in made.text
    assert made.n_refused == 0


def test_sequence_parent_and_block_seeds_are_told(tmp_path):
    """A gapless count is the sequence, other runs' names are parents, seeds once in each cell are blocks."""
    found = flat(
        number=lambda k: k,
        mode=lambda k: "ab"[k % 2],
        seed=lambda k: 10_000 + k // 2,
        resumed=lambda k: f"r{k - 10}" if k % 10 == 9 and k > 10 else None,
    )
    plan, _ = drafted(tmp_path, {"a.ndjson": lines(found)})
    assert plan.record.sequence == "number"
    assert plan.order.by == "sequence"
    assert plan.record.parent == "resumed"
    assert plan.seeds.role == "block"


def test_many_small_cells_are_pooled(tmp_path):
    """Where few runs have eight earlier ones in their cell, the drafted baseline is pooled."""
    plan, _ = drafted(
        tmp_path, {"a.ndjson": lines(flat(100, a=lambda k: f"x{k % 5}y", b=lambda k: k % 4 / 8))}
    )
    assert plan.baseline.kind == "pooled"


def test_times_without_an_offset_get_a_zone_and_a_question(tmp_path):
    """Naive times are taken for UTC, and asked about."""
    plan, made = drafted(
        tmp_path, {"a.ndjson": lines(flat(began=lambda k: f"2027-03-01T{k // 60:02}:{k % 60:02}:00"))}
    )
    assert plan.record.zone == "UTC"
    assert plan.record.started == "began"
    assert "in which zone?" in made.text
    assert made.n_refused == 0


def test_hostile_keys_and_values_stay_in_their_places(tmp_path):
    """Line ends, quotes and controls in keys and values break out of no comment and no string."""
    key = 'y"]\nevil = 1\n[x] # \x1b[31m\u202e~/'
    found = [
        {"id": f"r{k}", key: k * 0.37 % 1.9, "m\nq": "ab\n#"[k % 2] + "\n[campaign]\n"} for k in range(100)
    ]
    plan, made = drafted(tmp_path, {"a.ndjson": lines(found)})
    assert [one.at for one in plan.responses.values()] == [key]
    assert "\x1b" not in made.text
    assert "\u202e" not in made.text.replace(json.dumps(key, ensure_ascii=False)[1:-1], "")
    assert made.n_refused == 0


def test_an_existing_plan_is_never_overwritten(tmp_path):
    """Exit 73, and the file is as it was."""
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "a.ndjson").write_text(lines(records(20)))
    plan = tmp_path / "plan.toml"
    plan.write_text("mine")
    done = runaudit(plan, "draft", str(tmp_path / "results"), "-o", str(plan))
    assert done.returncode == 73
    assert plan.read_text() == "mine"


@pytest.mark.parametrize("files", [{}, {"notes.xyz": "a"}, {"a.json": "{"}, {"a.ndjson": '{"id": "x"}\n'}])
def test_nothing_to_judge_is_said(tmp_path, files):
    """No file, unknown files, broken files, no outcome: BadInput names what was found."""
    with pytest.raises(BadInput, match="results"):
        drafted(tmp_path, files)


def test_names_are_fit_for_a_plan_and_differ():
    """Names keep to letters, digits, _ and -, avoid the tool's own and each other."""
    names = list(
        names_for([("a", "x"), ("b", "x"), ("order",), ("duration",), ("9 é",), ("out", "duration")]).values()
    )
    assert len(set(names)) == len(names)
    assert not {"order", "duration"} & set(names)
    assert all(name[0].isalpha() and name.isascii() for name in names)


def test_words_of_names():
    """Camel, snake and kebab case come apart alike."""
    assert words_of("runId") == words_of("run_id") == words_of("run-id") == {"run", "id"}
    assert words_of("RNG_seed2") == {"rng", "seed"}
