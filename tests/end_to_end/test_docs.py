"""What the documents say is so: commands, plan, exit codes, help, changelog, and what must not be there."""

import os
import re
import subprocess
import sys
import tomllib
from datetime import UTC, datetime, timedelta
from pathlib import Path

import click
import pytest
from click.testing import CliRunner

from auditd import errors
from auditd.cli import main as command
from auditd.plan_reading import load_plan
from auditd.verdicts.explanations import explain

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
CHANGELOG = (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
CALL = re.compile(r"(?:`|^ *|/)runaudit(?: --plan \S+)? ([a-z]+)(?: ([a-z]+))?", re.MULTILINE)
FENCE = re.compile(r"^( *)```(\w*)\n(.*?)^\1```$", re.MULTILINE | re.DOTALL)


def fenced(text, language):
    """Return the blocks of a language, without their indentation."""
    return [
        "".join(line.removeprefix(indent) for line in body.splitlines(keepends=True))
        for indent, name, body in FENCE.findall(text)
        if name == language
    ]


def commands():
    """Yield every command with its full name."""
    for name, one in command.main.commands.items():
        yield name, one
        for inner, part in getattr(one, "commands", {}).items():
            yield f"{name} {inner}", part


def sources():
    """Return the files that git knows or would take in: relative names."""
    listed = subprocess.run(
        ["git", "-C", str(ROOT), "ls-files", "--cached", "--others", "--exclude-standard"],
        capture_output=True, text=True, check=False,
    )  # fmt: skip
    if listed.returncode != 0:
        pytest.skip(
            "not a git checkout: what belongs to the repository cannot be told from what lies beside it"
        )
    return [name for name in listed.stdout.splitlines() if (ROOT / name).is_file()]


def texts():
    """Return every text file of the repository by name."""
    found = {}
    for name in sources():
        content = (ROOT / name).read_bytes()
        if b"\0" not in content:
            found[name] = content.decode("utf-8")
    return found


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_every_command_that_is_named_exists(text):
    """A document names no command, and no command of `store`, that there is not."""
    named = CALL.findall(text)
    known = dict(commands())
    assert named or text is DEVELOPERS
    for name, inner in named:
        assert name in known, name
        if isinstance(known[name], click.Group) and inner:
            assert f"{name} {inner}" in known


def test_the_options_that_the_readme_shows_exist():
    """Each line of the README's shell blocks is taken by the command line's own parser."""
    for block in fenced(README, "sh"):
        for line in block.splitlines():
            words = line.split("#")[0].replace('"fan replaced"', "fan-replaced").split()
            if words[:1] != ["runaudit"]:
                continue
            one = command.main.commands[words[1]]
            one.make_context(words[1], words[2:], parent=click.Context(command.main))


def test_exit_codes_are_those_of_the_command():
    """README and `--help` list the same codes, and every error's code is among them."""
    in_readme = dict(
        re.findall(r"(\d+) ([a-z][a-z ]+?)(?: \(|;|\.)", README.split("Exit codes:")[1].split("Shell")[0])
    )
    in_help = dict(re.findall(r"(\d+) ([a-z][a-z ]+?)(?:,|\.)", command.main.epilog))
    assert in_readme == in_help
    tree = [errors.AuditdError]
    for one in tree:
        tree += one.__subclasses__()
    stated = {
        command.EXIT_USAGE,
        command.EXIT_UNAVAILABLE,
        command.EXIT_INTERNAL,
        command.EXIT_CANNOT_CREATE,
        0,
        1,
    }
    assert {int(code) for code in in_readme} == stated | {one.exit_code for one in tree}


def record(k):
    started = datetime(2027, 3, 1, tzinfo=UTC) + timedelta(minutes=10 * k)
    return (
        f'{{"id": "r{k}", "time": {{"start": "{started.isoformat()}", '
        f'"end": "{(started + timedelta(minutes=7)).isoformat()}"}}, "seed": "{k}", "status": "ok", '
        f'"out": {{"energy": {(k * 37 % 101) / 17 + k / 1e6}}}, '
        f'"cfg": {{"scheme": "{("direct", "staged")[k * 7 % 11 % 2]}"}}, "env": {{"host": "h{k % 3}"}}}}\n'
    )


def test_the_readmes_plan_works(tmp_path):
    """The example is valid as it stands, takes runs that are laid out as it says, and answers."""
    (example,) = fenced(README, "toml")
    plan = tmp_path / "plan.toml"
    plan.write_text(example, encoding="utf-8")
    assert load_plan(plan).campaign.title == tomllib.loads(example)["campaign"]["title"]
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "all.ndjson").write_text("".join(map(record, range(80))))
    for arguments, words in (
        (("gather",), "gathered 80 runs"),
        (("compare",), "scheme=staged less scheme=direct"),
    ):
        done = subprocess.run(
            [sys.executable, "-P", "-m", "auditd", "--plan", str(plan), *arguments],
            capture_output=True, text=True, check=False, timeout=120,
        )  # fmt: skip
        assert done.returncode == 0, done.stderr
        assert words in done.stdout + done.stderr


def test_the_readmes_python_runs():
    """What the README imports can be imported."""
    (block,) = fenced(README, "python")
    exec(compile(block, "README.md", "exec"), {})  # noqa: S102 - the document's own lines


def test_the_two_commands_are_those_that_tests_run():
    """CI calls the README's test command, which lints, checks types and runs the suite."""
    demo, test = (block for block in fenced(README, "sh") if not block.startswith("runaudit"))
    assert test == "sh tests/run\n"
    assert (ROOT / ".ci" / "run").read_text().splitlines()[-1] == f"exec {test.strip()}"
    assert demo.count("\n") == 1
    assert demo.endswith(".venv/bin/runaudit demo\n")
    script = (ROOT / "tests" / "run").read_text()
    for part in ("ruff check", "ruff format --check", "mypy", "pytest"):
        assert part in script
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    assert project["scripts"] == {"runaudit": "auditd.cli.main:run"}
    assert "sh tests/run" in DEVELOPERS


@pytest.mark.parametrize(
    ("name", "one"), tuple(commands()), ids=lambda value: value if isinstance(value, str) else ""
)
def test_help_fits_100_columns_and_shows_an_example(name, one, monkeypatch):
    """On a wide terminal no line of help is longer, and a command shows how it is called."""
    monkeypatch.setenv("COLUMNS", "200")
    shown = CliRunner().invoke(command.main, [*name.split(), "--help"])
    assert shown.exit_code == 0
    assert max(map(len, shown.output.splitlines())) <= 100
    assert "\\b" not in shown.output
    if not isinstance(one, click.Group):
        example = (one.epilog or "").removeprefix("Example: ")
        assert name.split()[-1] in example
        assert example.startswith("runaudit")


def test_the_list_of_commands_cuts_no_sentence_off(monkeypatch):
    """Each command's line in `--help` is a whole sentence, also in 80 columns."""
    monkeypatch.setenv("COLUMNS", "80")
    shown = CliRunner().invoke(command.main, ["--help"]).output
    of_store = CliRunner().invoke(command.main, ["store", "--help"]).output
    for text in (shown, of_store):
        assert [line for line in text.splitlines()[1:] if line.endswith("...")] == []
    assert re.search(r"^ +runaudit demo ", shown, re.MULTILINE)


def test_kinds_and_folders_that_the_documents_name_exist():
    """A kind that the README explains can be explained; DEVELOPERS' map shows what is there."""
    for kind in re.findall(r"runaudit explain (\w+)", README + DEVELOPERS):
        assert explain(kind).asks
    tree = DEVELOPERS.split("## Where things are")[1].split("Imports point")[0]
    named = re.findall(r"^ {6}([\w/]+(?:\.py)?) {2,}", tree, re.MULTILINE)
    assert len(named) > 15
    missing = [name for name in named if not (ROOT / "auditd" / name).exists()]
    assert missing == []
    folders = {path.name + "/" for path in (ROOT / "auditd").iterdir() if (path / "__init__.py").exists()}
    assert folders - set(named) == set()


def test_links_of_the_documents_lead_somewhere():
    """Every link to a file leads to one."""
    for text in (README, DEVELOPERS, CHANGELOG):
        for target in re.findall(r"\]\((?!https?:)([^)#]+)\)", text):
            assert (ROOT / target).exists(), target


def test_the_changelog_keeps_its_form():
    """Keep a Changelog 1.1.0: versions as `## [..]` with ISO dates, changes under its six headings."""
    lines = CHANGELOG.splitlines()
    assert lines[0] == "# Changelog"
    assert "keepachangelog.com" in CHANGELOG
    versions = [line for line in lines if line.startswith("## ")]
    assert versions[0] == "## [Unreleased]"
    assert all(re.fullmatch(r"## \[\d+\.\d+\.\d+\] - \d{4}-\d\d-\d\d", line) for line in versions[1:])
    kinds = {line.removeprefix("### ") for line in lines if line.startswith("### ")}
    assert kinds <= {"Added", "Changed", "Deprecated", "Removed", "Fixed", "Security"}
    assert kinds


FORBIDDEN = (
    "TO" + "DO", "FIX" + "ME", "X" * 3 + ":", "/wo" + "rk/", "/fa" + "rm/", "farm" + "-", "pypi" + ".org",
    "pythonhosted" + ".org", "proxy.golang" + ".org", "registry.npmjs" + ".org",
    "lorem" + " ipsum",
)  # fmt: skip
"""Built of parts, so that this file holds none of them."""


def test_no_file_holds_what_belongs_to_a_machine_or_to_later():
    """No machine's path, no registry's host, no note of work left, in any file of the repository."""
    found = [(name, word) for name, text in texts().items() for word in FORBIDDEN if word in text]
    assert found == []


def test_no_file_is_left_over():
    """Nothing of an editor, a run or an operating system lies in the tree."""
    left = re.compile(r"(\.orig|\.rej|\.swp|~|\.pyc|\.DS_Store|\.sqlite(-wal|-shm)?)$")
    assert [name for name in sources() if left.search(name)] == []
    assert os.access(ROOT / ".ci" / "run", os.X_OK)
