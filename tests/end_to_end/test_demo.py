"""The demo, as a user runs it: every planted fault is found, and its clean twin raises nothing."""

import json
import re
import subprocess
import sys

import pytest

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]


def demo(edition, keep):
    return subprocess.run(
        [sys.executable, "-P", "-m", "auditd", "demo", "--edition", edition, "--keep", str(keep)],
        capture_output=True,
        text=True,
        check=False,
    )


def test_the_demo_finds_every_planted_fault(tmp_path):
    """Six faults are planted, each is found, and nothing else is raised."""
    done = demo("faulty", tmp_path / "kept")
    assert done.returncode == 0, done.stdout + done.stderr
    assert "NOT FOUND" not in done.stdout
    assert "raised, but not planted" not in done.stdout
    assert len(set(re.findall(r"^    [a-z ]+ +k\d{4} +(W\d+)", done.stdout, re.MULTILINE))) == 6


def test_the_clean_twin_raises_nothing(tmp_path):
    """The same campaign without faults ends without a warning."""
    done = demo("clean", tmp_path / "kept")
    assert done.returncode == 0, done.stdout + done.stderr
    listed = subprocess.run(
        [
            sys.executable,
            "-m",
            "auditd",
            "--plan",
            str(tmp_path / "kept/clean/plan.toml"),
            "warnings",
            "--json",
        ],
        capture_output=True,
        text=True,
        check=False,
    )
    assert listed.returncode == 0
    assert json.loads(listed.stdout) == {"schema": 1, "warnings": []}
