"""Every end of a command has a stated exit code, and one line says why."""

import errno
import json
import os
import re
import signal
import subprocess
import sys
import time

import click
import psutil
import pytest
from campaigns_made import append, lay_out, records
from sqlalchemy.exc import OperationalError

from auditd import errors
from auditd.cli import main as command
from auditd.pipeline.gathering import gather

RFC_3339_UTC = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d+)?Z")
DOCUMENTS = (
    ("status",), ("warnings",), ("runs",), ("runs", "--refused"), ("evidence",), ("compare",), ("audit",),
    ("show", "W1"), ("show", "run:r00003"), ("explain",), ("explain", "drift"),
)  # fmt: skip


def ended(monkeypatch, error):
    def end(**_options):
        raise error

    monkeypatch.setattr(command.main, "main", end)
    return command.run_code([])


@pytest.mark.parametrize(
    ("error", "code", "words"),
    [
        (click.UsageError("odd"), 64, "odd"),
        (click.exceptions.NoSuchOption("--odd"), 64, "--odd"),
        (errors.BadInput("bad data"), 65, "bad data"),
        (errors.NotTestable(5, 3), 65, "needs 5, got 3"),
        (errors.Unavailable("no answer"), 69, "no answer"),
        (OperationalError("select", {}, Exception("server closed")), 69, "server closed"),
        (errors.AuditdError("ours"), 70, "ours"),
        (ValueError("crash\x1b[31m"), 70, "unexpected ValueError: crash\\x1b[31m"),
        (RecursionError("deep"), 70, "RUNAUDIT_TRACE=1"),
        (OSError(errno.ENOSPC, "No space left on device"), 73, "No space left"),
        (OSError(errno.EIO, "Input/output error"), 70, "unexpected OSError"),
        (errors.CannotCreate("is there"), 73, "is there"),
        (errors.StoreHeld("held"), 75, "held"),
        (errors.PlanError("plan"), 78, "plan"),
        (errors.PlanChanged("changed"), 78, "changed"),
        (errors.StoreError("store"), 78, "store"),
        (errors.StoreNewer("newer"), 78, "newer"),
        (errors.StoreDamaged("damaged"), 78, "damaged"),
        (KeyboardInterrupt(), 130, ""),
        (click.Abort(), 130, ""),
        (click.exceptions.Exit(0), 0, ""),
    ],
    ids=lambda value: type(value).__name__ if isinstance(value, BaseException) else None,
)
def test_every_error_has_its_code_and_one_line(monkeypatch, capsys, error, code, words):
    """The codes are those of sysexits.h (BSD) as the README lists them; no traceback, nothing on stdout."""
    monkeypatch.delenv("RUNAUDIT_TRACE", raising=False)
    assert ended(monkeypatch, error) == code
    out, err = capsys.readouterr()
    assert out == ""
    assert words in err
    assert "Traceback" not in err


def test_every_error_of_the_tree_has_a_code_of_the_list():
    """A new error cannot come with a code that nobody has stated."""
    tree = [errors.AuditdError]
    for one in tree:
        tree += one.__subclasses__()
    assert {one.exit_code for one in tree} <= {64, 65, 69, 70, 73, 75, 78}


def test_the_trace_is_shown_when_asked(monkeypatch, capsys):
    """RUNAUDIT_TRACE=1 shows where an unexpected error came from."""
    monkeypatch.setenv("RUNAUDIT_TRACE", "1")
    assert ended(monkeypatch, ValueError("crash")) == 70
    assert "Traceback" in capsys.readouterr().err


@pytest.mark.parametrize(
    "arguments", [["nosuch"], ["status", "--odd"], ["explain", "a", "b"], ["runs", "--limit", "0"], ["show"]]
)
def test_usage_errors_are_64(arguments, capsys):
    """Click's own code 2 is never passed on."""
    assert command.run_code(arguments) == 64
    assert "Usage:" in capsys.readouterr().err


def test_help_and_version_end_well(capsys):
    """Both go to stdout and end with 0, also with nothing else said."""
    for arguments in (["--help"], ["--version"], ["status", "-h"]):
        assert command.run_code(arguments) == 0
    assert "First steps:\n" in capsys.readouterr().out


@pytest.fixture(scope="module")
def stored(tmp_path_factory):
    """A campaign with a warning, a refusal and hostile names, gathered."""
    folder = tmp_path_factory.mktemp("ended")
    plan = lay_out(folder)
    made = records(80, failing={7})
    made[5]["seed"] = made[4]["seed"]
    made[9]["env"]["host"] = "h2\x1b[2J"
    append(folder, [*made, records(1)[0] | {"id": "bad", "out": {}}])
    gather(plan, lambda _step, _totals: None)
    return plan


def started(plan, *arguments, **options):
    return subprocess.Popen(
        [sys.executable, "-P", "-m", "auditd", "--plan", str(plan), *arguments],
        env=os.environ | {"PYTHONUNBUFFERED": ""},
        **options,
    )


@pytest.mark.parametrize("arguments", DOCUMENTS, ids=" ".join)
def test_json_is_one_document_with_times_in_utc(stored, arguments, capfd):
    """`--json` prints exactly one document of schema 1, every time in it RFC 3339 in UTC, nothing beside."""
    assert command.run_code(["--plan", str(stored), *arguments, "--json"]) in {0, 1}
    out, err = capfd.readouterr()
    document = json.loads(out)
    assert document["schema"] == 1
    assert err == ""
    times = [text for text in texts_in(document) if re.match(r"\d{4}-\d\d-\d\dT", text)]
    assert all(RFC_3339_UTC.fullmatch(text) for text in times)
    if arguments[0] in {"warnings", "runs"} and "--refused" not in arguments:
        assert times


def texts_in(value):
    if isinstance(value, dict):
        return [text for inner in value.values() for text in texts_in(inner)]
    if isinstance(value, list):
        return [text for inner in value for text in texts_in(inner)]
    return [value] if isinstance(value, str) else []


@pytest.mark.parametrize("arguments", DOCUMENTS, ids=" ".join)
@pytest.mark.parametrize(
    "environment",
    [{}, {"NO_COLOR": "1", "FORCE_COLOR": "1", "TERM": "xterm-256color"}],
    ids=["plain", "coloured"],
)
def test_text_is_plain(stored, arguments, environment, capfd, monkeypatch):
    """No escape is printed, of ours or of a run, off a terminal and under NO_COLOR (no-color.org)."""
    for name, value in environment.items():
        monkeypatch.setenv(name, value)
    assert command.run_code(["--plan", str(stored), *arguments]) in {0, 1}
    out, err = capfd.readouterr()
    assert out
    assert "\x1b" not in out + err


def test_a_closed_pipe_ends_with_0_and_silence(stored):
    """A reader that has seen enough, as `head` does, is no error."""
    reading, writing = os.pipe()
    os.close(reading)
    with started(stored, "runs", "--json", stdout=writing, stderr=subprocess.PIPE) as process:
        os.close(writing)
        _, err = process.communicate(timeout=60)
    assert (process.returncode, err) == (0, b"")


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="the system has no /dev/full")
@pytest.mark.parametrize("arguments", [("runs", "--json"), ("explain", "gap"), ("--help",)], ids=" ".join)
def test_output_without_room_is_73(stored, arguments):
    """A full disk under a redirected output is said in one line."""
    with (
        open("/dev/full", "w") as full,
        started(stored, *arguments, stdout=full, stderr=subprocess.PIPE) as process,
    ):
        _, err = process.communicate(timeout=60)
    assert process.returncode == 73
    assert err.decode().count("\n") == 1


def test_ctrl_c_is_130(stored):
    """An interrupted command ends with 130 and without a traceback."""
    with started(
        stored, "rehearse", "--campaigns", "100000", stdout=subprocess.PIPE, stderr=subprocess.PIPE
    ) as process:
        while not any("scipy" in one.path for one in psutil.Process(process.pid).memory_maps()):
            time.sleep(0.05)  # the command itself has begun: it loads SciPy
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert out == b""
    assert b"Traceback" not in err


@pytest.mark.parametrize(("grade", "code"), [("note", 1), ("material", 1), ("severe", 0)])
def test_exit_1_is_for_standing_warnings_at_least_so_grave(stored, grade, code, capsys):
    """The campaign's only warning is material (a seed used twice)."""
    for name in ("status", "warnings"):
        assert command.run_code(["--plan", str(stored), name, "--at-least", grade]) == code
    capsys.readouterr()
