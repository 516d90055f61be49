"""The systemd unit, checked by systemd itself where it is installed."""

import configparser
import os
import pathlib
import shutil
import subprocess

import pytest

from auditd.errors import BadInput, PlanError
from auditd.plan_reading import parse_plan
from auditd.service import NO_RESTART, unit_name, unit_text

PLAN = '[campaign]\ntitle = "Tides 100% \\u001b[31m"\n[responses.error]\nat = "error"\n[record]\nid = "id"\n'
HARDENING = {
    "Type": "notify", "Restart": "on-failure", "NoNewPrivileges": "yes", "ProtectSystem": "strict",
    "PrivateUsers": "yes", "RestrictSUIDSGID": "yes", "SystemCallFilter": "@system-service",
}  # fmt: skip


def campaign(folder: pathlib.Path, more: str = "") -> pathlib.Path:
    folder.mkdir(parents=True, exist_ok=True)
    plan = folder / "plan.toml"
    plan.write_text(PLAN + more)
    return plan


def program(folder: pathlib.Path) -> pathlib.Path:
    folder.mkdir(parents=True, exist_ok=True)
    file = folder / "runaudit"
    file.write_text("#!/bin/sh\n")
    file.chmod(0o755)
    return file


def section(text: str, name: str) -> dict[str, str]:
    parser = configparser.ConfigParser(interpolation=None, strict=False, delimiters="=")
    parser.optionxform = str
    parser.read_string(text)
    return dict(parser[name])


def test_the_unit_is_hardened_and_does_not_restart_what_a_restart_cannot_mend(tmp_path):
    """The settings that make it safe to leave alone."""
    text = unit_text(campaign(tmp_path / "a"), program(tmp_path))
    service = section(text, "Service")
    assert service | HARDENING == service
    assert service["RestartPreventExitStatus"] == " ".join(map(str, NO_RESTART)) == "64 65 73 75 78"
    assert int(service["WatchdogSec"]) > 0
    assert "enable-linger" in text
    assert "\x1b" not in text
    assert section(text, "Unit")["Description"] == "Audit of the campaign Tides 100%% [31m"


def test_only_the_folders_of_store_and_report_are_written_to(tmp_path):
    """Of a folder that does not exist yet, the nearest that does."""
    more = '[report]\npath = "pages/report.html"\n[store]\nurl = "sqlite:///kept/audit.sqlite"\n'
    plan = campaign(tmp_path / "a", more)
    (tmp_path / "a" / "kept").mkdir()
    text = unit_text(plan, program(tmp_path))
    lines = [line for line in text.splitlines() if line.startswith("ReadWritePaths=")]
    assert lines[:2] == [f'ReadWritePaths="{tmp_path}/a/kept"', f'ReadWritePaths="{tmp_path}/a"']


def test_a_store_on_a_server_needs_no_folder(tmp_path):
    """Nothing of the disk is written to."""
    more = '[store]\nurl = "postgresql+psycopg://audit@db.example.org/audit"\n'
    text = unit_text(campaign(tmp_path / "a", more), program(tmp_path))
    lines = [line for line in text.splitlines() if line.startswith("ReadWritePaths=")]
    assert lines in ([], ['ReadWritePaths="/tmp"'])


def test_a_landing_below_tmp_is_not_hidden_from_the_daemon():
    """PrivateTmp would show an empty folder in its place."""
    import tempfile

    with tempfile.TemporaryDirectory(dir="/tmp") as folder:
        text = unit_text(campaign(pathlib.Path(folder)), program(pathlib.Path(folder)))
    assert section(text, "Service")["PrivateTmp"] == "no"


def test_a_plan_that_cannot_be_used_gives_no_unit(tmp_path):
    """An error with the plan's name instead."""
    with pytest.raises(PlanError, match="missing"):
        unit_text(tmp_path / "missing.toml", program(tmp_path))


def test_the_units_name_is_plain_whatever_the_folder_is_called():
    """A unit's file name takes few signs."""
    plan = parse_plan(PLAN, pathlib.Path("/data/Tides & co. 100%/plan.toml"))
    assert unit_name(plan) == "runaudit-Tides---co--100"


NAMES = [
    "plain",
    "two words",
    "100% sure",
    'quo"ted',
    "back\\slash",
    "$HOME",
    "ümlaut",
    "it's",
    "semi;colon",
    "%h",
]


@pytest.mark.parametrize("name", NAMES)
def test_systemd_itself_reads_the_paths_as_they_are(tmp_path, name):
    """`systemd-analyze verify` complains of a program that is not there, hence of one wrongly quoted."""
    if shutil.which("systemd-analyze") is None:
        pytest.skip("systemd-analyze is not installed")
    folder = tmp_path / name
    takes_any = not set(name) & set("\"'\\")
    text = unit_text(campaign(folder), program(folder if takes_any else tmp_path))
    ended = verify(tmp_path, text)
    assert ended.returncode == 0, ended.stderr
    assert ended.stderr == ""
    wrong = verify(tmp_path, text.replace('/runaudit"', '/gone"'))
    assert "not executable" in wrong.stderr or "No such file" in wrong.stderr


@pytest.mark.parametrize("name", ["it's", 'quo"ted', "back\\slash", "esc\x1b"])
def test_a_program_that_systemd_would_never_run_is_refused(tmp_path, name):
    """systemd takes no quotes and backslashes there, however they are written."""
    with pytest.raises(BadInput, match="install auditd in another folder"):
        unit_text(campaign(tmp_path / "a"), program(tmp_path / name))


def verify(tmp_path: pathlib.Path, text: str) -> subprocess.CompletedProcess:
    unit = tmp_path / "runaudit-test.service"
    unit.write_text(text)
    environ = {"PATH": os.environ["PATH"], "HOME": str(tmp_path), "XDG_RUNTIME_DIR": str(tmp_path)}
    return subprocess.run(
        ["systemd-analyze", "--user", "--man=no", "verify", str(unit)],
        env=environ, capture_output=True, text=True, timeout=60, check=False,
    )  # fmt: skip
