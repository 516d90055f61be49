"""Answers given while the daemon runs, and the next fault after an absorbed one."""

import json
import statistics
import time

import pytest
from campaigns_made import append, lay_out, records, runaudit
from kills import asked, n_stored
from watching import Watch, until

from auditd.landing import Landing
from auditd.pipeline.campaign import open_for_taking
from auditd.pipeline.grouping import grouped
from auditd.pipeline.replying import reply
from auditd.pipeline.session import Session
from auditd.store.sources import stored_sources

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

ALARMS = (
    "SELECT number, position, along FROM cautions "
    "WHERE kind IN ('drift', 'serial', 'batch', 'spread', 'clock') ORDER BY number"
)


def epochs(folder):
    """Return each epoch's first position and scope."""
    rows = asked(folder, "SELECT from_position, scope FROM epochs ORDER BY epoch")
    return [(position, json.loads(scope)) for position, scope in rows]


def answers(folder):
    """Return what was answered, and from which position on it applies."""
    rows = asked(folder, "SELECT action, scope, from_position FROM answers ORDER BY row")
    return [(action, json.loads(scope), position) for action, scope, position in rows]


def n_placed(folder):
    """Count the runs that have their places."""
    return asked(folder, "SELECT count(position) FROM runs")[0][0]


def test_answers_apply_from_the_next_position_while_the_daemon_runs_and_nothing_is_half_applied(tmp_path):
    """Restart, restart of one host, absorb and setting aside open epochs where they say; bad ones nothing."""
    plan = lay_out(tmp_path)
    made = records(1_000, seed=3, step_at=100, step=3.0)
    with Watch(plan) as watch:
        append(tmp_path, made[:300])
        until(lambda: n_stored(tmp_path) == 300 and asked(tmp_path, ALARMS), 60, lambda: watch.said)
        name = f"W{asked(tmp_path, ALARMS)[0][0]}"
        for arguments, code in (
            ((name, "why", "--restart", "rack=1"), 65),
            (("W99", "no such warning", "--absorb"), 65),
            ((name, " ", "--absorb"), 65),
            ((name, "two at once", "--absorb", "--restart"), 64),
        ):
            assert runaudit(plan, "answer", *arguments).returncode == code
        assert (answers(tmp_path), len(epochs(tmp_path))) == ([], 1)
        steps = (
            (("--restart", "host=h2"), "restart", {"host": "h2"}),
            (("--absorb",), "absorb", None),
            (("--restart",), "restart", {}),
            (("--set-aside", "host=h2"), "set-aside", {"host": "h2"}),
            ((), "noted", {}),
        )
        for number, (arguments, action, scope) in enumerate(steps):
            until(lambda: n_placed(tmp_path) > 0)
            before = n_placed(tmp_path)
            assert runaudit(plan, "answer", name, "repaired", *arguments).returncode == 0
            start = 300 + 100 * number
            append(tmp_path, made[start : start + 100])
            until(lambda n=number: len(answers(tmp_path)) == n + 1 and answers(tmp_path)[n][2] is not None)
            got = answers(tmp_path)[number]
            assert got[0] == action
            assert scope is None or got[1] == scope
            assert before <= got[2] <= start
        until(lambda: n_stored(tmp_path) == 800)
        watch.kill()
        watch.start()
        append(tmp_path, made[800:])
        until(lambda: n_stored(tmp_path) == 1_000, tell=lambda: watch.said)
        assert watch.end() == 0
    opened = [position for action, _, position in answers(tmp_path) if action in {"restart", "absorb"}]
    assert [position for position, _ in epochs(tmp_path)] == [0, *opened]
    assert epochs(tmp_path)[1][1] == {"host": "h2"}
    assert runaudit(plan, "gather").returncode == 0
    shown = json.loads(runaudit(plan, "warnings", "--json").stdout)["warnings"]
    assert next(w for w in shown if w["id"] == name)["state"] == "answered"
    words = runaudit(plan, "show", name).stdout
    assert words.count("repaired") >= 1
    compared = runaudit(plan, "compare").stdout + runaudit(plan, "compare", "--json").stdout
    assert "set aside" in compared or "set_aside" in compared


def audited(plan):
    """Take and audit all that has landed, without weighing it."""
    campaign = open_for_taking(plan)
    session = Session(campaign)
    with campaign.engine.connect() as connection:
        known = list(stored_sources(connection))
    for group in grouped(Landing(campaign.plan, known, settle_all=True).scan(time.time())):
        session.take_all(group, at_once=False)
    session.take_up()
    session.advance(flush="the test says so")
    campaign.engine.dispose()


def first_alarm(folder, since):
    """Return the position of the first sequential alarm from one on, or None."""
    return min((row[1] for row in asked(folder, ALARMS) if row[1] >= since), default=None)


FIRST_AT, SECOND_AT, N = 200, 500, 900


def campaign_of(seed, *, first):
    """Return runs with a step on h3 at the second place and, if asked, one on h2 at the first."""
    made = records(N, seed=seed, step_at=FIRST_AT if first else None, step=2.0)
    for run in made[SECOND_AT:]:
        if run["env"]["host"] == "h3":
            run["out"]["energy"] += 2.0
    return made


def test_after_an_absorbed_host_step_the_next_fault_is_found_nearly_as_soon_as_alone(tmp_path, monkeypatch):
    """The median delay of eight seeded campaigns is at most 1.3 times what it is without the first fault."""
    monkeypatch.setenv("RUNAUDIT_KEY", "00ff")
    delays = {True: [], False: []}
    for seed in range(8):
        for first in (True, False):
            folder = tmp_path / f"{seed}{first}"
            plan = lay_out(folder)
            made = campaign_of(seed, first=first)
            append(folder, made[: SECOND_AT - 20])
            audited(plan)
            if first:
                number = next(row[0] for row in asked(folder, ALARMS) if row[2] == "host")
                reply(plan, f"W{number}", "h2 was given another cooler; it is known", "absorb", {})
            append(folder, made[SECOND_AT - 20 :])
            audited(plan)
            found = first_alarm(folder, SECOND_AT)
            delays[first].append((N if found is None else found) - SECOND_AT)
    after, alone = statistics.median(delays[True]), statistics.median(delays[False])
    print(f"delay after an absorbed step {after}, alone {alone}: {delays}")
    assert after <= 1.3 * alone
