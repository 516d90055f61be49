"""The plan: every table of the documented example, refusals that name the key, and what needs `amend`."""

import contextlib
import pathlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.errors import PlanError
from auditd.plan import Derived, cells_matching, duration_s
from auditd.plan_reading import load_plan, parse_plan

SMALL = '[responses.error]\nat = "error"\n'
WHOLE = """
[campaign]
title = "Tidal mesh study"
alarm_budget = 0.05
confidence = 0.95
horizon = 2000
[landing]
paths = ["results"]
match = ["*.json"]
format = "json"
settle = "2s"
watch = "auto"
[record]
id = "/id"
sequence = "/seq"
started = "/time/start"
finished = "/time/end"
seed = "/rng/seed"
parent = "/restart_of"
status = "/status"
completed = ["ok"]
zone = "UTC"
[responses.head_error]
at = "/out/head_error"
scale = "log"
margin = 0.02
unit = "m"
[factors]
solver = "/cfg/solver"
mesh = "/cfg/mesh"
[nuisance]
host = "/env/host"
build = "/env/build"
day = {from = "started", by = "day"}
[machines]
exclusive = ["host"]
slots = 4
[order]
by = "started"
patience = "auto"
[design]
allocation = "fixed"
stage = "/stage"
[baseline]
kind = "formula"
formula = "solver + log(mesh)"
[seeds]
role = "unique"
[schedule]
replicates = 20
hosts = ["n1", "n2", "n3"]
levels = {solver = ["implicit", "explicit"], mesh = ["fine", "coarse"]}
[report]
path = "report.html"
every = "15m"
[[comparisons]]
response = "head_error"
between = [{solver = "implicit"}, {solver = "explicit"}]
[[alerts]]
to = "command"
argv = ["./tell-me"]
grades = ["material", "severe"]
[[alerts]]
to = "url"
url_file = "secrets/alert-url"
[silence]
after = "3h"
[store]
url = "sqlite:///audit.sqlite"
"""


def test_the_whole_plan_of_the_design_is_read(tmp_path):
    """Every table and key, typed."""
    file = tmp_path / "plan.toml"
    file.write_text(WHOLE)
    plan = load_plan(file)
    assert plan.campaign.horizon == 2000
    assert plan.responses["head_error"].scale == "log"
    assert plan.nuisance["day"] == Derived(source="started", by="day")
    assert plan.comparisons[0].between == ({"solver": "implicit"}, {"solver": "explicit"})
    assert [alert.grades for alert in plan.alerts] == [["material", "severe"]] * 2
    assert (plan.folder, plan.text) == (tmp_path, WHOLE)


def test_the_least_plan_is_one_response():
    """Everything else has a default, and arrival is the order."""
    plan = parse_plan(SMALL)
    assert (plan.order.by, plan.baseline.kind, plan.campaign.alarm_budget) == (None, "cells", 0.05)
    assert plan.folder == pathlib.Path.cwd()


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "responses"),
        ("[responses]", "no response is named"),
        ("x = ", "not TOML"),
        (SMALL + "[campagin]", "unknown key 'campagin'; did you mean 'campaign'?"),
        (
            SMALL + "[campaign]\nalarm_buget = 0.1",
            "unknown key 'campaign.alarm_buget'; did you mean 'alarm_budget'?",
        ),
        (SMALL + "zzz = 1", "unknown key 'responses.error.zzz'; known here: at, scale, margin, unit"),
        (SMALL + '[nuisance]\nday = {from = "started", buy = "day"}', "unknown key 'nuisance.day.buy'"),
        (
            SMALL + '[[alerts]]\nto = "command"\nargs = ["x"]',
            "unknown key 'alerts[0].args'; did you mean 'argv'?",
        ),
        (SMALL + "[campaign]\nalarm_budget = 0", "between 0 and 1"),
        (SMALL + "[campaign]\nalarm_budget = nan", "between 0 and 1"),
        (SMALL + "[campaign]\nalarm_budget = '0.1'", "campaign.alarm_budget"),
        (SMALL + "[campaign]\nconfidence = 1.0", "between 0.5 and 1"),
        (SMALL + "[campaign]\nhorizon = 0", "campaign.horizon"),
        (SMALL + "margin = 0", "larger than 0"),
        (SMALL + "margin = nan", "larger than 0"),
        (SMALL + "margin = inf", "larger than 0"),
        (SMALL + "scale = 'cubic'", "responses"),
        (SMALL + "[landing]\nsettle = '2'", "landing.settle: '2' is not a duration"),
        (SMALL + "[order]\npatience = '-1s'", "order.patience"),
        (SMALL + "[silence]\nafter = 'soon'", "silence.after"),
        (SMALL + f"[silence]\nafter = '{'9' * 400}d'", "longer than ten years"),
        (SMALL + "[report]\nevery = ''", "report.every"),
        (SMALL + "[record]\nzone = '../../etc/passwd'", "record.zone"),
        (SMALL + "[record]\nzone = 'Mars/Olympus'", "is not a time zone"),
        (SMALL + "[landing]\nformat = 'text'", "landing.pattern is missing"),
        (SMALL + "[landing]\nformat = 'text'\npattern = '('", "not a regular expression"),
        (SMALL + "[landing]\nformat = 'text'\npattern = 'x'", "no named group"),
        ("[responses.duration]\nat = 'x'", "the tool's own"),
        (SMALL + "[nuisance]\norder = 'x'", "the tool's own"),
        (SMALL + "[factors]\nerror = 'x'", "responses has the same name"),
        (SMALL + "[factors]\n'a b' = 'x'", "a name has letters"),
        (SMALL + "[factors]\n\"a\\nb\" = 'x'", "a name has letters"),
        (SMALL + "[machines]\nexclusive = ['hots']\n[nuisance]\nhost = 'h'", "did you mean 'host'?"),
        (SMALL + "[schedule]\nlevels = {mash = [1]}\n[factors]\nmesh = 'm'", "did you mean 'mesh'?"),
        (SMALL + "[seeds]\nrole = 'block'", "record.seed is not stated"),
        (SMALL + "[nuisance]\nday = {from = 'started', by = 'day'}", "record.started is not stated"),
        (SMALL + "[order]\nby = 'sequence'", "record.sequence is not stated"),
        (SMALL + "[order]\nby = 'luck'", "order.by"),
        (SMALL + "[baseline]\nkind = 'formula'", "baseline.formula is missing"),
        (
            SMALL + "[baseline]\nkind = 'formula'\nformula = 'mash'\n[factors]\nmesh = 'm'",
            "did you mean 'mesh'?",
        ),
        (SMALL + "[[comparisons]]\nresponse = 'eror'\nbetween = [{}, {}]", "did you mean 'error'?"),
        (
            SMALL + "[[comparisons]]\nresponse = 'error'\nbetween = [{a = 1}, {}]",
            "'a' is not known; known: none",
        ),
        (SMALL + "[[comparisons]]\nresponse = 'error'\nbetween = [{}]", "comparisons"),
        (SMALL + "[[alerts]]\nto = 'command'", "alerts[0].argv is missing"),
        (SMALL + "[[alerts]]\nto = 'url'", "url_file or url_env"),
        (SMALL + "[[alerts]]\nto = 'url'\nurl_file = 'a'\nurl_env = 'b'", "one of them"),
        (SMALL + "[[alerts]]\nto = 'url'\nurl = 'json://x'", "unknown key 'alerts[0].url'"),
        (SMALL + "[[alerts]]\nto = 'pigeon'", "alerts"),
    ],
)
def test_what_is_wrong_is_refused_with_its_key(text, said):
    """One error of one kind, that names the file, the key and what is expected."""
    with pytest.raises(PlanError) as caught:
        parse_plan(text, pathlib.Path("some/plan.toml"))
    assert said in str(caught.value)


@pytest.mark.parametrize("body", [b"\xff\xfe", None])
def test_a_file_that_cannot_be_read_is_a_plan_error(tmp_path, body):
    """Missing, or not text."""
    file = tmp_path / "plan.toml"
    if body is not None:
        file.write_bytes(body)
    with pytest.raises(PlanError, match="cannot be read"):
        load_plan(file)


@given(st.text(max_size=200))
def test_any_text_is_a_plan_or_a_plan_error(text):
    """Nothing else comes out of a hostile plan."""
    with contextlib.suppress(PlanError):
        parse_plan(text)


@pytest.mark.parametrize("depth", [100, 20_000])
def test_deep_nesting_is_refused(depth):
    """No stack is exhausted."""
    with pytest.raises(PlanError):
        parse_plan("x = " + "[" * depth + "]" * depth)


FREE = [
    ('title = "Tidal mesh study"', 'title = "Another"'),
    ("horizon = 2000", "horizon = 3000"),
    ('settle = "2s"', 'settle = "9s"'),
    ('argv = ["./tell-me"]', 'argv = ["./tell-them"]'),
    ('after = "3h"', 'after = "4h"'),
    ("sqlite:///audit.sqlite", "sqlite:///b.sqlite"),
    ('every = "15m"', 'every = "5m"'),
    ("replicates = 20", "replicates = 30"),
    ("[campaign]", "# a comment\n[campaign]"),
]
AUDITED = [
    ("alarm_budget = 0.05", "alarm_budget = 0.06"),
    ("confidence = 0.95", "confidence = 0.9"),
    ("margin = 0.02", "margin = 0.03"),
    ('scale = "log"', 'scale = "linear"'),
    ('build = "/env/build"', 'build = "/env/version"'),
    ('mesh = "/cfg/mesh"', 'mesh = "/cfg/grid"'),
    ('patience = "auto"', 'patience = "1h"'),
    ('formula = "solver + log(mesh)"', 'formula = "solver"'),
    ('{solver = "implicit"}', '{mesh = "fine"}'),
    ('role = "unique"', 'role = "block"'),
    ('zone = "UTC"', 'zone = "Europe/Paris"'),
    ("slots = 4", "slots = 5"),
]


@pytest.mark.parametrize(("old", "new"), FREE)
def test_what_decides_nothing_changes_freely(old, new):
    """The hash over the audited fields stays."""
    assert old in WHOLE
    assert parse_plan(WHOLE.replace(old, new, 1)).audited_hash == parse_plan(WHOLE).audited_hash


@pytest.mark.parametrize(("old", "new"), AUDITED)
def test_what_decides_a_verdict_changes_the_hash(old, new):
    """Such a change needs `amend`."""
    assert old in WHOLE
    assert parse_plan(WHOLE.replace(old, new, 1)).audited_hash != parse_plan(WHOLE).audited_hash


@pytest.mark.parametrize(
    ("text", "seconds"),
    [("250ms", 0.25), ("2s", 2), ("15m", 900), ("3h", 10800), ("1.5d", 129600), (" 1 w ", 604800), ("0s", 0)],
)
def test_durations(text, seconds):
    """Each unit, with a fraction and blanks."""
    assert duration_s(text) == seconds


@pytest.mark.parametrize(
    ("group", "belongs"),
    [
        ({}, True),
        ({"mesh": 1}, True),
        ({"mesh": 1.0}, True),
        ({"mesh": "1"}, False),
        ({"mesh": True}, False),
        ({"mesh": 1, "solver": "x"}, True),
        ({"mesh": 1, "solver": "y"}, False),
        ({"other": None}, False),
        ({"shape": [1, 2.0]}, True),
    ],
)
def test_a_groups_levels_are_compared_as_json_values(group, belongs):
    """1 and 1.0 are one level, "1" and true are others; a list is its text."""
    assert cells_matching(group, {"mesh": 1, "solver": "x", "shape": "[1,2.0]"}) is belongs
