"""A week of campaign at 10,000 runs a day in accelerated time, beside the real daemon.

Run by hand: `python tests/faults/soak.py [DAYS] [RUNS_A_DAY]`. Prints, after each day, resident memory, open
descriptors and processor time of the daemon; the test of the same folder holds a shorter one to its bounds.
"""

import json
import os
import signal
import sqlite3
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import psutil

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
from campaigns_made import lay_out, records

BURST = 250
"""Runs that land at once; then the daemon is waited for, so that days do not pile up."""


def soak(folder, days, runs_a_day, *, say=print):
    """Return a row a day: runs, resident bytes, descriptors, processor seconds."""
    plan = lay_out(folder)
    store = folder / ".runaudit" / "store.sqlite"
    rows = []
    with (folder / "log").open("wb") as log:
        daemon = subprocess.Popen(
            [sys.executable, "-P", "-m", "auditd", "--plan", str(plan), "watch"],
            stdout=log,
            stderr=log,
            env=os.environ | {"RUNAUDIT_KEY": "00ff"},
        )
        process = psutil.Process(daemon.pid)
        made = records(days * runs_a_day, seed=11)
        try:
            for day in range(days):
                for start in range(day * runs_a_day, (day + 1) * runs_a_day, BURST):
                    land(folder, made[start : start + BURST], day)
                    wait(store, start + BURST, daemon)
                cpu = process.cpu_times()
                rows.append(
                    {
                        "day": day + 1,
                        "runs": (day + 1) * runs_a_day,
                        "rss_mib": process.memory_info().rss / 2**20,
                        "descriptors": process.num_fds(),
                        "cpu_s": cpu.user + cpu.system,
                    }
                )
                say(json.dumps(rows[-1]), flush=True)
        finally:
            daemon.send_signal(signal.SIGTERM)
            daemon.wait(20)
    return rows


def land(folder, runs, day):
    """Append runs to the day's file."""
    with (folder / "results" / f"day{day}.ndjson").open("a") as stream:
        stream.writelines(json.dumps(run) + "\n" for run in runs)


def wait(store, n, daemon):
    """Wait until the daemon has taken n runs."""
    deadline = time.monotonic() + 120
    while time.monotonic() < deadline:
        if daemon.poll() is not None:
            raise RuntimeError("the daemon ended")
        if store.exists():
            connection = sqlite3.connect(f"file:{store}?mode=ro", uri=True)
            try:
                if connection.execute("SELECT count(*) FROM runs").fetchone()[0] >= n:
                    return
            except sqlite3.OperationalError:
                pass
            finally:
                connection.close()
        time.sleep(0.02)
    raise RuntimeError(f"{n} runs were not taken in time")


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as place:
        soak(
            Path(place) / "campaign",
            int(sys.argv[1]) if len(sys.argv) > 1 else 7,
            int(sys.argv[2]) if len(sys.argv) > 2 else 10_000,
        )
