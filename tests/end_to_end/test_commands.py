"""Every command on a real store: exit codes, JSON as contracted, and what an operator reads."""

import json

import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit


@pytest.fixture(scope="module")
def stepped(tmp_path_factory):
    """A campaign of 600 runs in which host h2 steps by 2 sd at run 200, gathered."""
    folder = tmp_path_factory.mktemp("stepped")
    plan = lay_out(folder)
    append(folder, records(600, step_at=200))
    done = runaudit(plan, "gather")
    assert done.returncode == 0, done.stderr
    return plan


def test_warnings_name_the_host_and_the_run(stepped):
    """The step is one warning along the host, dated to the planted run, with remedy and cost; exit 1."""
    done = runaudit(stepped, "warnings", "--json")
    document = json.loads(done.stdout)
    assert done.returncode == 1
    assert document["schema"] == 1
    (one,) = [w for w in document["warnings"] if w["response"] == "energy"]
    assert one["kind"] in {"drift", "serial"}
    assert (one["along"], one["level"], one["state"]) == ("host", "h2", "standing")
    assert one["grade"] in {"material", "severe"}
    assert one["since_low"] - 10 <= 200 <= one["since_high"] + 10
    assert one["log_e"] >= one["threshold"] - 3
    assert "run" in one["remedy"].rsplit("Cost:", 1)[1]
    assert {"id", "raised_at", "run", "index", "n", "evidence_loss", "effect", "message", "with"} <= set(one)


def test_status_counts_add_up(stepped):
    """Runs, responses and warnings stand in status, and the daemon is said not to run."""
    done = runaudit(stepped, "status", "--json")
    document = json.loads(done.stdout)
    assert done.returncode == 1
    assert (document["runs"], document["completed"], document["refused"]) == (600, 600, 0)
    assert document["audited"] + document["waiting"] + document["late"] == document["runs"]
    assert document["daemon"]["alive"] is False
    energy = document["responses"]["energy"]
    assert energy["n"] == 600
    assert energy["n_effective"] < 600
    assert set(energy["would_see"]) == {"drift", "icc", "ar"}
    assert document["warnings"]["standing"] >= 1


def test_runs_are_listed_in_order_with_circumstances(stepped):
    """Positions count from 0 in the order of start; conditions select."""
    document = json.loads(runaudit(stepped, "runs", "--json").stdout)
    assert [run["position"] for run in document["runs"]] == list(range(600))
    first = document["runs"][0]
    assert {"id", "arrival", "position", "started", "finished", "seed", "status", "cell", "nuisance"} <= set(
        first
    )
    assert first["source"]["path"] == "results/runs.ndjson"
    assert first["late"] is False
    assert first["started"] == "2027-03-01T00:00:00Z"
    some = json.loads(runaudit(stepped, "runs", "--json", "--where", "host=h2", "--limit", "3").stdout)
    assert [run["nuisance"]["host"] for run in some["runs"]] == ["h2"] * 3


def test_evidence_and_compare_answer(stepped):
    """Effective numbers and the planned comparison have every contracted field, and the look is counted."""
    document = json.loads(runaudit(stepped, "evidence", "--json").stdout)
    energy = document["responses"]["energy"]
    assert {"n", "n_effective", "loss", "parts", "cells"} <= set(energy)
    assert sum(cell["n"] for cell in energy["cells"]) == 600
    first, second = (json.loads(runaudit(stepped, "compare", "--json").stdout) for _ in range(2))
    assert second["look"] == first["look"] + 1
    (one,) = first["comparisons"]
    assert one["planned"] is True
    assert one["low"] < one["estimate"] < one["high"]
    assert one["low_any"] < one["low"]
    assert one["high"] < one["high_any"]
    assert one["verdict"] in {"beyond the margin", "within the margin", "undecided"}
    other = json.loads(runaudit(stepped, "compare", "scheme=staged", "scheme=direct", "--json").stdout)
    assert {c["response"] for c in other["comparisons"]} == {"energy", "steps"}
    assert all(c["planned"] is False for c in other["comparisons"])


def test_show_and_explain_read_well(stepped):
    """One warning and one run are shown in full, and every kind is explained."""
    shown = runaudit(stepped, "show", "W1")
    assert shown.returncode == 0
    assert "W raised" in shown.stdout
    assert max(map(len, shown.stdout.splitlines())) <= 110
    assert "r00007" in runaudit(stepped, "show", "run:r00007").stdout
    assert "Source" in runaudit(stepped, "explain", "drift").stdout
    assert runaudit(stepped, "show", "W99").returncode == 65
    assert runaudit(stepped, "explain", "nonsense").returncode == 65


def test_store_is_verified_and_backed_up(stepped, tmp_path):
    """The audit made anew from the store agrees with what was raised; a backup is a store too."""
    done = runaudit(stepped, "store", "verify")
    assert done.returncode == 0, done.stderr
    backup = tmp_path / "copy.sqlite"
    assert runaudit(stepped, "store", "backup", str(backup)).returncode == 0
    assert backup.stat().st_size > 100_000
    assert runaudit(stepped, "store", "backup", str(backup)).returncode == 73


def test_gathering_again_takes_nothing_twice(stepped):
    """A second gather finds all runs taken and raises nothing new."""
    done = runaudit(stepped, "gather")
    assert done.returncode == 0
    assert "gathered 0 runs" in done.stderr
    assert json.loads(runaudit(stepped, "status", "--json").stdout)["runs"] == 600


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (("nonsense",), 64),
        (("warnings", "--state", "odd"), 64),
        (("runs", "--where", "odd"), 65),
        (("compare", "scheme=direct"), 64),
        (("compare", "colour=red", "colour=blue"), 65),
        (("answer", "W99", "why"), 65),
        (("amend", "no change"), 78),
    ],
)
def test_mistakes_have_their_exit_codes(stepped, arguments, code):
    """A mistake of the caller ends with the stated code and one line that says what is expected."""
    done = runaudit(stepped, *arguments)
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""


def test_a_missing_plan_and_a_missing_store_say_so(tmp_path):
    """Without a plan, or before the first run, the message says what to do, and the code is 78."""
    done = runaudit(tmp_path / "none.toml", "status")
    assert (done.returncode, "no plan" in done.stderr) == (78, True)
    plan = lay_out(tmp_path)
    done = runaudit(plan, "status")
    assert (done.returncode, "runaudit gather" in done.stderr) == (78, True)


def test_a_changed_plan_needs_an_amendment(tmp_path):
    """What is audited cannot change silently; an amendment opens an epoch, and the difference is shown."""
    plan = lay_out(tmp_path)
    append(tmp_path, records(60))
    assert runaudit(plan, "gather").returncode == 0
    plan.write_text(PLAN.replace("margin = 0.2", "margin = 0.5"))
    refused = runaudit(plan, "gather")
    assert refused.returncode == 78
    assert "margin" in refused.stderr
    amended = runaudit(plan, "amend", "the margin was in the wrong unit")
    assert amended.returncode == 0, amended.stderr
    assert "responses.energy.margin: 0.2 -> 0.5" in amended.stderr
    assert runaudit(plan, "gather").returncode == 0
    kinds = [w["kind"] for w in json.loads(runaudit(plan, "warnings", "--json").stdout)["warnings"]]
    assert "plan" in kinds


def test_bad_records_are_refused_with_reasons_and_the_rest_is_taken(tmp_path):
    """Broken lines, lacking responses and hostile names are listed, and none reaches the terminal raw."""
    plan = lay_out(tmp_path)
    good = records(3)
    evil = records(1, seed=9)[0] | {"id": "x\x1b[31m\ny"}
    lacking = {key: value for key, value in records(2)[1].items() if key != "out"} | {"id": "lacks"}
    append(tmp_path, good)
    with (tmp_path / "results" / "runs.ndjson").open("a") as stream:
        stream.write("{broken\n" + json.dumps(evil) + "\n" + json.dumps(lacking) + "\n")
    done = runaudit(plan, "gather")
    assert done.returncode == 0
    assert "2 refused" in done.stderr
    refused = json.loads(runaudit(plan, "runs", "--refused", "--json").stdout)["refused"]
    assert len(refused) == 2
    assert all(one["path"] == "results/runs.ndjson" and one["reason"] for one in refused)
    listing = runaudit(plan, "runs").stdout
    assert "\x1b" not in listing
    assert "x\\x1b[31m\\ny" in listing


def test_help_has_an_example_for_every_command(stepped):
    """Each command's help ends with an example."""
    from auditd.cli.main import main

    for name, command in main.commands.items():
        subcommands = getattr(command, "commands", {name: command})
        for one in subcommands.values():
            assert "Example" in (one.epilog or ""), name
