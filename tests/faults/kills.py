"""A daemon that is killed again and again while runs land, beside a gather of the same files.

Run by hand: `python tests/faults/kills.py [RUNS] [KILLS]` (100,000 and 200 unless stated). Prints what was
lost, taken twice or told otherwise; all three have to be nothing.
"""

import json
import random
import sqlite3
import sys
import tempfile
import threading
import time
from contextlib import closing, suppress
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
from campaigns_made import PLAN, append, lay_out, records, runaudit, start_daemon

TELLER = """#!/bin/sh
cat >> told.jsonl
echo >> told.jsonl
"""
ALERTS = """
[[alerts]]
to = "command"
argv = ["./tell"]
grades = ["note", "material", "severe"]
"""
N_A_WRITE = (1, 40)
"""Lines that land at once: few, so that a kill meets many half-finished steps."""
SHARE_AT_START = 0.3
"""Kills that come at any moment after the start, also while Python is still importing; the others come
when the daemon has taken a run."""


def play(folder, n, n_kills, *, seed=1, say=print):
    """Land n runs beside a daemon that is killed; return the folders of it and of the undisturbed gather."""
    made = records(n, seed=11, step_at=n // 2, failing=range(n // 10, n // 10 + 4))
    for repeated in range(n // 3, n // 3 + 3):
        made[repeated]["seed"] = made[repeated - 7]["seed"]
    rng = random.Random(seed)
    killed, whole = folder / "killed", folder / "whole"
    plan = lay_out(killed, PLAN + ALERTS)
    (killed / "tell").write_text(TELLER)
    (killed / "tell").chmod(0o755)
    landed = _Landing(killed, made, rng)
    with (folder / "log").open("wb") as log:
        for kill in range(n_kills):
            daemon = start_daemon(plan, log)
            landed.allow(n * (kill + 1) // (n_kills + 1))
            _await_moment(killed, daemon, rng, landed)
            daemon.kill()
            daemon.wait()
            if kill % 20 == 19:
                say(f"{kill + 1} kills, {landed.n} runs landed, {n_stored(killed)} taken", flush=True)
        landed.allow(n)
        daemon = start_daemon(plan, log)
        try:
            _wait_for(lambda: n_stored(killed) >= n, daemon, 300)
            _wait_for(lambda: n_due(killed) == 0, daemon, 60)
        finally:
            daemon.terminate()
            code = daemon.wait(15)
    assert code == 0, f"the daemon ended with {code}"
    landed.join()
    gathered = runaudit(plan, "gather")
    assert gathered.returncode == 0, gathered.stderr
    beside = lay_out(whole, PLAN + ALERTS)
    append(whole, made)
    gathered = runaudit(beside, "gather")
    assert gathered.returncode == 0, gathered.stderr
    return killed, whole


class _Landing:
    """Writes runs to a growing file from a thread, a few lines at a time and some of them in two pieces."""

    def __init__(self, folder, made, rng):
        self.n = 0
        self._folder = folder
        self._made = made
        self._rng = random.Random(rng.random())
        self._allowed = threading.Semaphore(0)
        self._until = 0
        self._thread = threading.Thread(target=self._write, daemon=True)
        self._thread.start()

    def allow(self, n):
        """Let runs land up to the n-th."""
        self._until = n
        self._allowed.release()

    def join(self):
        """Wait for the last run to land."""
        self._thread.join(60)

    def _write(self):
        with (self._folder / "results" / "runs.ndjson").open("a", buffering=1) as stream:
            while self.n < len(self._made):
                if self.n >= self._until:
                    self._allowed.acquire()
                    continue
                size = min(self._rng.randint(*N_A_WRITE), self._until - self.n)
                text = "".join(json.dumps(run) + "\n" for run in self._made[self.n : self.n + size])
                cut = self._rng.randrange(len(text)) if self._rng.random() < 0.3 else len(text)
                stream.write(text[:cut])
                stream.flush()
                if text[cut:]:
                    time.sleep(0.01)
                    stream.write(text[cut:])
                    stream.flush()
                self.n += size
                time.sleep(0.002)


def _await_moment(folder, daemon, rng, landed):
    """Wait for the moment of a kill."""
    if rng.random() < SHARE_AT_START:
        time.sleep(rng.uniform(0, 2.0))
        return
    before = n_stored(folder)
    with suppress(TimeoutError):
        _wait_for(lambda: n_stored(folder) > before, daemon, 30)
    time.sleep(rng.uniform(0, 0.25))


def _wait_for(condition, daemon, seconds):
    deadline = time.monotonic() + seconds
    while not condition():
        if daemon.poll() is not None:
            raise RuntimeError(f"the daemon ended with {daemon.returncode}")
        if time.monotonic() > deadline:
            raise TimeoutError("not reached in time")
        time.sleep(0.005)


def asked(folder, query):
    """Return a query's rows from the store of a campaign; nothing where there is no store yet."""
    store = folder / ".runaudit" / "store.sqlite"
    if not store.exists():
        return []
    with closing(sqlite3.connect(f"file:{store}?mode=ro", uri=True)) as connection:
        try:
            return connection.execute(query).fetchall()
        except sqlite3.OperationalError:
            return []


def n_stored(folder):
    """Count the stored runs."""
    found = asked(folder, "SELECT count(*) FROM runs")
    return found[0][0] if found else 0


def n_due(folder):
    """Count the alerts that are still to be delivered."""
    return asked(folder, "SELECT count(*) FROM outbox WHERE state = 'due'")[0][0]


def places(folder):
    """Return every run with its arrival and position."""
    return asked(folder, "SELECT id, arrival, position, late FROM runs ORDER BY arrival")


def told(folder):
    """Return the warnings' kind, place, run and evidence to nine decimals."""
    query = "SELECT kind, along, level, response, run, position, round(log_e, 9) FROM cautions"
    return sorted(asked(folder, query), key=repr)


def alerted(folder):
    """Return which warnings have alerts in the outbox, and the alerts' ids."""
    query = (
        "SELECT DISTINCT kind, along, level, response, run, target FROM outbox "
        "JOIN cautions ON number = outbox.caution"
    )
    ids = [row[0] for row in asked(folder, "SELECT alert_id FROM outbox")]
    return sorted(asked(folder, query), key=repr), ids


def delivered(folder):
    """Return the ids of the alerts that the command was given, with repeats."""
    return [json.loads(line)["alert_id"] for line in (folder / "told.jsonl").read_text().splitlines() if line]


if __name__ == "__main__":
    n_runs = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
    n_times = int(sys.argv[2]) if len(sys.argv) > 2 else 200
    with tempfile.TemporaryDirectory() as place:
        began = time.monotonic()
        one, other = play(Path(place), n_runs, n_times)
        ids, wanted = [row[0] for row in places(one)], {row[0] for row in places(other)}
        print(f"{n_times} kills in {n_runs} runs, {time.monotonic() - began:.0f} s")
        print(f"lost: {len(wanted - set(ids))}, twice: {len(ids) - len(set(ids))}")
        print(f"places alike: {places(one) == places(other)}")
        print(f"warnings alike: {told(one) == told(other)} ({len(told(other))})")
        print(f"warnings with alerts alike: {alerted(one)[0] == alerted(other)[0]}")
        print(f"alerts never delivered: {len(set(alerted(one)[1]) - set(delivered(one)))}")
