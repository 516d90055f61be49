"""Opening a campaign: which plan, what of it is kept, and what a change of it is."""

import pytest

from auditd.errors import PlanChanged, PlanError
from auditd.pipeline.campaign import (
    find_plan,
    new_key,
    open_for_taking,
    plan_difference,
    settle_plan,
    text_to_keep,
)
from auditd.plan_reading import parse_plan

PLAN = '[responses.x]\nat = "x"\nmargin = 1.0\n'


@pytest.mark.parametrize(
    "url", ["postgresql+psycopg://me:s3:cret@db/x", "postgresql://me:secret@db/x", "postgresql://:secret@/x"]
)
def test_a_password_is_never_stored_with_the_plan(url):
    """The stored text names server and user, and not the password."""
    kept = text_to_keep(parse_plan(f'{PLAN}[store]\nurl = "{url}"\n'))
    assert "secret" not in kept
    assert "s3" not in kept
    assert parse_plan(kept).responses == parse_plan(PLAN).responses


def test_a_plan_is_found_here_or_above(tmp_path, monkeypatch):
    """`plan.toml` of a folder serves the folders below it; a missing one is said with what to do."""
    below = tmp_path / "a" / "b"
    below.mkdir(parents=True)
    monkeypatch.chdir(below)
    with pytest.raises(PlanError, match="draft"):
        find_plan(str(below / "none.toml"))
    (tmp_path / "plan.toml").write_text(PLAN)
    assert find_plan(None) == tmp_path / "plan.toml"


def test_the_difference_names_what_changed():
    """Only audited fields count: a landing may move, a margin may not."""
    old = parse_plan(PLAN)
    assert plan_difference(old, parse_plan(PLAN.replace("1.0", "2.0"))) == ["responses.x.margin: 1.0 -> 2.0"]
    assert plan_difference(old, parse_plan(PLAN + '[landing]\npaths = ["elsewhere"]\n')) == []


def test_a_changed_plan_is_refused_once_runs_are_stored(tmp_path, monkeypatch):
    """Before the first run a plan changes freely; the epoch's key may be stated."""
    monkeypatch.setenv("RUNAUDIT_KEY", "0a0b")
    assert new_key() == b"\x0a\x0b"
    path = tmp_path / "plan.toml"
    path.write_text(PLAN)
    assert settle_plan(open_for_taking(path)).key == b"\x0a\x0b"
    path.write_text(PLAN.replace("1.0", "2.0"))
    settle_plan(open_for_taking(path))
    (tmp_path / "a.ndjson").write_text('{"x": 1}\n')
    from auditd.pipeline.gathering import gather

    gather(path, lambda _step, _totals: None)
    path.write_text(PLAN.replace("1.0", "3.0"))
    with pytest.raises(PlanChanged, match="margin"):
        settle_plan(open_for_taking(path))
