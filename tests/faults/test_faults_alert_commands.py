"""Alerts to real commands that hang, flood, fail and leave children behind."""

import contextlib
import itertools
import pathlib
import sqlite3
import threading
import time
from datetime import timedelta

import psutil
import pytest
from alert_campaign import HOSTILE, KEEP, NOW, Campaign, command_campaign, got
from sqlalchemy import select

from auditd.alerts.backoff import N_TRIES
from auditd.alerts.command import tell_command
from auditd.alerts.deliver import Delivered
from auditd.alerts.message import messages_for
from auditd.store.clock import to_us
from auditd.store.tables import outbox

SECRET = "hunter2-s3cr3t-token"  # noqa: S105 - made up, to be looked for


def test_a_command_is_given_the_warning_without_a_shell_and_in_a_clean_environment(tmp_path, monkeypatch):
    """The argument list and a run's hostile name reach the program as they are, and nothing else does."""
    monkeypatch.setenv("AUDITD_ALERT_TOKEN", SECRET)
    campaign = command_campaign(tmp_path, KEEP)
    campaign.put(target="command:0", run=HOSTILE)
    assert campaign.deliver() == Delivered(n_delivered=1, n_messages=1)
    [(arguments, body, environ, folder)] = got(tmp_path)
    assert arguments[1:] == ["$(touch x)", "a b"]
    assert (body["id"], body["level"], body["campaign"], body["alert_id"]) == ("W1", HOSTILE, "Tides", "a0")
    assert set(environ) - {"LC_CTYPE"} <= {"PATH", "HOME", "LANG", "TZ"}
    assert folder == str(tmp_path)
    assert not list(tmp_path.rglob("x"))
    assert campaign.counts() == {"due": 0, "delivered": 1, "dead": 0}


def test_a_delivered_letter_is_not_sent_again(tmp_path):
    """A second pass finds nothing due."""
    campaign = command_campaign(tmp_path, KEEP)
    campaign.put(target="command:0")
    campaign.deliver()
    assert campaign.deliver(NOW + timedelta(days=3)) == Delivered()
    assert len(got(tmp_path)) == 1


def test_a_letter_is_sent_again_when_the_mark_was_lost_and_keeps_its_id(tmp_path):
    """Killed between sending and marking, the letter goes once more under the same id."""
    campaign = command_campaign(tmp_path, KEEP)
    campaign.put(target="command:0")
    campaign.engine.dispose()
    before = sqlite3.connect(tmp_path / "store.sqlite")
    campaign.deliver()
    before.execute("UPDATE outbox SET state='due', delivered_us=NULL")
    before.commit()
    before.close()
    campaign.deliver()
    assert [body["alert_id"] for _, body, _, _ in got(tmp_path)] == ["a0", "a0"]


def test_the_time_limit_ends_the_whole_process_group(tmp_path):
    """A command that hangs, ignores SIGTERM and has a child of its own is ended with that child."""
    script = (
        "import os, signal, subprocess, sys, time\n"
        "signal.signal(signal.SIGTERM, signal.SIG_IGN)\n"
        "child = subprocess.Popen([sys.executable, '-c', 'import time; time.sleep(300)'])\n"
        "open('pids', 'w').write(f'{os.getpid()} {child.pid}')\n"
        "time.sleep(300)\n"
    )

    campaign = command_campaign(tmp_path, script)
    campaign.put(target="command:0")
    [message] = messages_for(campaign.due())
    began = time.monotonic()
    attempt = tell_command(
        campaign.plan.alerts[0], message, folder=tmp_path, stop=threading.Event(), timeout_s=1.5
    )
    assert time.monotonic() - began < 8
    assert attempt.outcome == "failed"
    assert "had not ended after 1.5 s" in attempt.error
    assert_all_gone(tmp_path)


def assert_all_gone(folder: pathlib.Path) -> None:
    pids = [int(word) for word in (folder / "pids").read_text().split()]
    deadline = time.monotonic() + 5
    while time.monotonic() < deadline and any(alive(pid) for pid in pids):
        time.sleep(0.05)
    assert not any(alive(pid) for pid in pids)


def alive(pid: int) -> bool:
    with contextlib.suppress(psutil.NoSuchProcess):
        return psutil.Process(pid).status() != psutil.STATUS_ZOMBIE
    return False


def test_what_a_command_leaves_behind_is_ended_and_is_not_waited_for(tmp_path):
    """A child that keeps the output open after its parent's end neither holds the pass nor lives on."""
    script = (
        "import os, subprocess, sys\n"
        "child = subprocess.Popen([sys.executable, '-c', 'import time; time.sleep(300)'])\n"
        "open('pids', 'w').write(str(child.pid))\n"
    )
    campaign = command_campaign(tmp_path, script)
    campaign.put(target="command:0")
    began = time.monotonic()
    assert campaign.deliver().n_delivered == 1
    assert time.monotonic() - began < 10
    assert_all_gone(tmp_path)


def test_a_stop_ends_a_hanging_command_at_once_and_the_letter_stays_due(tmp_path):
    """Within the daemon's ten seconds; the try is not counted."""
    campaign = command_campaign(
        tmp_path, "import os, time\nopen('pids', 'w').write(str(os.getpid()))\ntime.sleep(300)\n"
    )
    campaign.put(target="command:0")
    stop = threading.Event()
    timer = threading.Timer(1.0, stop.set)
    timer.start()
    began = time.monotonic()
    assert campaign.deliver(stop=stop) == Delivered()
    timer.join()
    assert time.monotonic() - began < 5
    assert_all_gone(tmp_path)
    with campaign.engine.connect() as connection:
        assert connection.execute(select(outbox.c.state, outbox.c.n_tries)).all() == [("due", 0)]


def test_a_flood_of_output_is_capped_and_its_first_line_is_made_harmless(tmp_path):
    """Gigabytes neither fill the memory nor block the program; escapes do not reach the store."""
    script = (
        "import sys\nsys.stdout.write('\\x1b[2Jno \\x07route\\n')\n"
        "for _ in range(300): sys.stdout.write('x' * 1_000_000)\nsys.exit(3)\n"
    )
    campaign = command_campaign(tmp_path, script)
    campaign.put(target="command:0")
    before = psutil.Process().memory_info().rss
    assert campaign.deliver().n_failed == 1
    assert psutil.Process().memory_info().rss - before < 50e6
    error = campaign.error()
    assert error.endswith("ended with exit status 3: [2Jno route")
    assert error.isprintable()


@pytest.mark.parametrize(
    "argv", ['["./missing"]', '["/nowhere/at-all"]', '["."]', '["no-such-program-anywhere"]']
)
def test_a_command_that_cannot_be_started_is_a_failure_that_names_it(tmp_path, argv):
    """Nothing is raised into the daemon."""
    campaign = Campaign(tmp_path, f'[[alerts]]\nto = "command"\nargv = {argv}\n')
    campaign.put(target="command:0")
    assert campaign.deliver() == Delivered(n_failed=1)
    assert "cannot be started" in campaign.error()


def test_failures_wait_longer_each_time_and_are_dead_after_the_stated_number(tmp_path):
    """Twelve tries over about two days, then dead and shown; a good one in between ends it."""
    campaign = command_campaign(tmp_path, "import sys; sys.exit(1)\n")
    campaign.put(target="command:0")
    now, dues = NOW, []
    for _ in range(N_TRIES):
        done = campaign.deliver(now)
        assert done.n_failed + done.n_dead == 1
        with campaign.engine.connect() as connection:
            due_us = connection.execute(select(outbox.c.due_us)).scalar_one()
        assert campaign.deliver(now + timedelta(seconds=30)) == Delivered()
        dues.append(due_us - to_us(now))
        now += timedelta(microseconds=dues[-1])
    waits = dues[:-1]
    assert all(1.2 < later / earlier < 3.1 for earlier, later in itertools.pairwise(waits))
    assert timedelta(days=1.5) < now - NOW < timedelta(days=5)
    assert campaign.counts() == {"due": 0, "delivered": 0, "dead": 1}
    assert "exit status 1" in campaign.error()


def test_a_burst_is_one_message_that_names_the_leading_cause_and_the_number(tmp_path):
    """500 warnings at once; the one of the highest grade leads, and every id is there."""
    campaign = command_campaign(tmp_path, KEEP)
    campaign.put(250, target="command:0")
    campaign.put(1, target="command:0", run="the cause", grade="severe")
    campaign.put(249, target="command:0")
    assert campaign.deliver() == Delivered(n_delivered=500, n_messages=1)
    [(_, body, _, _)] = got(tmp_path)
    assert (body["id"], body["grade"], body["run" if "run" in body else "level"]) == (
        "W251",
        "severe",
        "the cause",
    )
    assert body["burst"]["n_warnings"] == 500
    assert set(body["burst"]["alert_ids"]) == {f"a{k}" for k in range(500)}
    assert body["burst"]["kinds"] == {"drift": 500}


def test_one_letter_that_always_fails_does_not_hold_up_the_others(tmp_path):
    """The target's other letters go at the next pass, before the one that fails."""
    script = KEEP.replace("with open", "if body['alert_id'] == 'a0': sys.exit(1)\nwith open")
    campaign = command_campaign(tmp_path, script)
    campaign.put(3, target="command:0")
    assert campaign.deliver() == Delivered(n_failed=1)
    assert campaign.deliver(NOW + timedelta(minutes=3)).n_delivered == 2
    assert {body["alert_id"] for _, body, _, _ in got(tmp_path)} == {"a1", "a2"}


def test_a_target_that_fails_does_not_keep_another_from_its_letters(tmp_path):
    """Targets are apart."""
    alerts = '[[alerts]]\nto = "command"\nargv = ["false"]\n[[alerts]]\nto = "command"\nargv = ["true"]\n'
    campaign = Campaign(tmp_path, alerts)
    campaign.put(2, target="command:0")
    campaign.put(2, target="command:1")
    assert campaign.deliver() == Delivered(n_delivered=2, n_messages=2, n_failed=1)


def test_a_target_that_the_plan_has_no_longer_is_given_up_and_said(tmp_path):
    """The letter is dead at once: nobody can ever receive it."""
    campaign = Campaign(tmp_path, "")
    campaign.put(target="command:0")
    assert campaign.deliver() == Delivered(n_dead=1)
    assert campaign.error() == "the plan no longer has the target command:0"
