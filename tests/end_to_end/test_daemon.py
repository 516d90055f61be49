"""The daemon beside a landing: exactly once through kill -9, in step with events, and ended politely."""

import json
import os
import signal
import time

import pytest
from campaigns_made import append, lay_out, records, runaudit, start_daemon

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]


def wait_for(plan, condition, *, seconds=40):
    """Poll status until the condition holds."""
    deadline = time.monotonic() + seconds
    document = None
    while time.monotonic() < deadline:
        done = runaudit(plan, "status", "--json")
        if done.stdout:
            document = json.loads(done.stdout)
            if condition(document):
                return document
        time.sleep(0.1)
    raise AssertionError(f"not reached: {document}")


def told(plan):
    """Return the warnings' kind, run, place and evidence."""
    found = json.loads(runaudit(plan, "warnings", "--json").stdout)["warnings"]
    return sorted(
        (w["kind"], w["along"], w["level"], w["response"], w["run"], w["index"], w["log_e"]) for w in found
    )


def test_two_kills_change_nothing(tmp_path):
    """Runs landed beside a daemon that is killed twice give the same runs and warnings as one gather."""
    made = records(600, seed=3, step_at=250, failing=range(30, 33))
    made[50]["seed"] = made[40]["seed"]
    plan = lay_out(tmp_path / "killed")
    with (tmp_path / "log").open("wb") as log:
        daemon = start_daemon(plan, log)
        try:
            for part in range(12):
                append(tmp_path / "killed", made[50 * part : 50 * part + 50])
                if part in {4, 8}:
                    time.sleep(0.4)
                    daemon.send_signal(signal.SIGKILL)
                    daemon.wait()
                    daemon = start_daemon(plan, log)
                wait_for(plan, lambda found, n=50 * part + 50: found["runs"] >= n)
            daemon.terminate()
            assert daemon.wait(15) == 0
        finally:
            daemon.kill()
            daemon.wait()
    assert runaudit(plan, "gather").returncode == 0
    whole = lay_out(tmp_path / "whole")
    append(tmp_path / "whole", made)
    assert runaudit(whole, "gather").returncode == 0
    runs = [json.loads(runaudit(one, "runs", "--json").stdout)["runs"] for one in (plan, whole)]
    assert [(r["id"], r["position"]) for r in runs[0]] == [(r["id"], r["position"]) for r in runs[1]]
    assert told(plan) == told(whole)
    kinds = {warning[0] for warning in told(plan)}
    assert {"seed"} <= kinds
    assert kinds & {"drift", "serial"}


def test_a_daemon_says_that_it_lives_and_ends_within_seconds(tmp_path):
    """Status shows the daemon alive, a second one is refused with 75, and SIGTERM ends it with 0."""
    plan = lay_out(tmp_path)
    append(tmp_path, records(30))
    with (tmp_path / "log").open("wb") as log:
        daemon = start_daemon(plan, log)
        try:
            found = wait_for(plan, lambda document: document["runs"] == 30 and document["daemon"]["alive"])
            assert found["daemon"]["pid"] == daemon.pid
            assert found["daemon"]["watch"] in {"events", "poll"}
            second = runaudit(plan, "watch")
            assert second.returncode == 75
            assert str(daemon.pid) in second.stderr
            began = time.monotonic()
            daemon.terminate()
            assert daemon.wait(12) == 0
            assert time.monotonic() - began < 10
        finally:
            daemon.kill()
            daemon.wait()
    assert wait_for(plan, lambda document: not document["daemon"]["alive"])


def test_a_warning_is_visible_within_a_second_of_its_run_being_released(tmp_path):
    """The median time from the landing that releases an alarming run to the visible warning is below 1 s."""
    waits = []
    for seed in range(3):
        folder = tmp_path / str(seed)
        plan = lay_out(folder)
        made = records(240, seed=seed)
        made[200]["seed"] = made[199]["seed"]
        with (tmp_path / "log").open("wb") as log:
            daemon = start_daemon(plan, log)
            try:
                append(folder, made[:190])
                wait_for(plan, lambda document: document["runs"] == 190)
                append(folder, made[190:])
                waits.append(seconds_until_raised(folder))
            finally:
                daemon.terminate()
                daemon.wait(15)
    assert sorted(waits)[1] <= 1.0, waits


def seconds_until_raised(folder):
    """Watch the store itself, since starting a command takes longer than what is measured."""
    import sqlite3

    began = time.monotonic()
    while time.monotonic() - began < 30:
        store = sqlite3.connect(f"file:{folder / '.runaudit/store.sqlite'}?mode=ro", uri=True)
        try:
            if store.execute("SELECT count(*) FROM cautions WHERE kind = 'seed'").fetchone()[0]:
                return time.monotonic() - began
        finally:
            store.close()
        time.sleep(0.01)
    raise AssertionError("no warning was raised")


def test_an_invalid_plan_is_refused_at_reload_and_the_old_one_kept(tmp_path):
    """SIGHUP reads the plan again; a broken one is said and not used, a good one is."""
    plan = lay_out(tmp_path)
    good = plan.read_text()
    append(tmp_path, records(10))
    with (tmp_path / "log").open("wb") as log:
        daemon = start_daemon(plan, log)
        try:
            wait_for(plan, lambda document: document["runs"] == 10)
            plan.write_text(good.replace("[responses.energy]", "[responzes.energy]"))
            os.kill(daemon.pid, signal.SIGHUP)
            deadline = time.monotonic() + 20
            while b"did you mean" not in (tmp_path / "log").read_bytes() and time.monotonic() < deadline:
                time.sleep(0.1)
            assert b"did you mean" in (tmp_path / "log").read_bytes()
            plan.write_text(good.replace('title = "Lattice relaxation"', 'title = "Lattice, renamed"'))
            os.kill(daemon.pid, signal.SIGHUP)
            append(tmp_path, records(20)[10:])
            wait_for(plan, lambda document: document["runs"] == 20)
            assert daemon.poll() is None
        finally:
            daemon.terminate()
            daemon.wait(15)
