"""Options that commands share: times, scopes, and the plan that they are about."""

from datetime import UTC, datetime

import click
import pytest

from auditd.cli.main import main, run_code
from auditd.cli.options import Instant, scope_of


@pytest.mark.parametrize(
    ("text", "at"),
    [
        ("2027-03-01T12:00:00Z", datetime(2027, 3, 1, 12, tzinfo=UTC)),
        ("2027-03-01T12:00:00+02:00", datetime(2027, 3, 1, 10, tzinfo=UTC)),
        ("2027-03-01", datetime(2027, 3, 1, tzinfo=UTC)),
        ("2027-03-01T12:00:00", datetime(2027, 3, 1, 12, tzinfo=UTC)),
    ],
)
def test_times_are_rfc_3339_and_utc_by_default(text, at):
    """An offset is kept as an instant, and none means UTC, whatever the machine's zone."""
    assert Instant().convert(text, None, None) == at


@pytest.mark.parametrize("text", ["yesterday", "2027-13-01", "", "12:00"])
def test_what_is_no_time_is_refused_with_an_example(text):
    """The message shows a time that would do."""
    with pytest.raises(click.BadParameter, match="2027-03-01T12:00:00Z"):
        Instant().convert(text, None, None)


def test_scopes_are_names_and_levels():
    """A level may hold an equals sign; a name or level that is missing is a usage error."""
    context = click.Context(main)
    assert scope_of(context, ("host=n3", "build=a=b")) == {"host": "n3", "build": "a=b"}
    for text in ("host", "=n3", "host="):
        with pytest.raises(click.UsageError, match="name=level"):
            scope_of(context, (text,))


def test_the_plan_is_found_here_or_above_and_by_option_before_environment(tmp_path, monkeypatch, capsys):
    """`--plan` goes before RUNAUDIT_PLAN, and that before plan.toml in this folder or one above."""
    for name in ("option", "environment", "here"):
        (tmp_path / name / "deep").mkdir(parents=True)
        (tmp_path / name / "plan.toml").write_text(f'[campaign]\ntitle = "{name}"\nodd = 1\n')
    monkeypatch.chdir(tmp_path / "here" / "deep")
    assert run_code(["status"]) == 78
    assert "here/plan.toml" in capsys.readouterr().err
    monkeypatch.setenv("RUNAUDIT_PLAN", str(tmp_path / "environment" / "plan.toml"))
    assert run_code(["status"]) == 78
    assert "environment/plan.toml" in capsys.readouterr().err
    assert run_code(["--plan", str(tmp_path / "option" / "plan.toml"), "status"]) == 78
    assert "option/plan.toml" in capsys.readouterr().err
