"""The daemon beside a landing whose events are lost, or which goes away and comes back."""

import json
import os
import shutil
import signal
import time

import pytest
from campaigns_made import PLAN, lay_out, records
from kills import n_stored
from watching import Watch, until

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

N_FILES = 30_000
"""More than the kernel's queue of events holds (fs.inotify.max_queued_events is 16,384 by default)."""
WITHIN_S = 60.0


def land_files(folder, runs):
    """Land each run as a file of its own, by rename."""
    (folder / "draft").mkdir(exist_ok=True)
    for run in runs:
        draft = folder / "draft" / f"{run['id']}.json"
        draft.write_text(json.dumps(run))
        draft.rename(folder / "results" / draft.name)


def test_an_overflow_of_30000_files_is_made_up_within_a_minute_and_said_once(tmp_path):
    """The daemon is stopped, 30,000 files land, it goes on: all are indexed, the overflow is noted once."""
    plan = lay_out(tmp_path)
    made = records(N_FILES + 1, seed=2)
    with Watch(plan) as watch:
        land_files(tmp_path, made[:1])
        until(lambda: n_stored(tmp_path) == 1)
        os.kill(watch.process.pid, signal.SIGSTOP)
        land_files(tmp_path, made[1:])
        began = time.monotonic()
        os.kill(watch.process.pid, signal.SIGCONT)
        until(lambda: n_stored(tmp_path) == N_FILES + 1, WITHIN_S, lambda: (n_stored(tmp_path), watch.said))
        print(f"{N_FILES} files after an overflow: {time.monotonic() - began:.1f} s")
        assert watch.said.count("the queue of events overflowed") == 1
        assert watch.end() == 0


def test_a_landing_removed_and_made_again_goes_on_and_takes_nothing_twice(tmp_path):
    """What lands after the folder came back is taken; what was taken is neither taken again nor dropped."""
    plan = lay_out(tmp_path, PLAN.replace('settle = "100ms"', 'settle = "100ms"\nwatch = "auto"'))
    made = records(30, seed=4)
    with Watch(plan) as watch:
        land_files(tmp_path, made[:10])
        until(lambda: n_stored(tmp_path) == 10)
        shutil.rmtree(tmp_path / "results")
        time.sleep(1.5)
        (tmp_path / "results").mkdir()
        land_files(tmp_path, made[:20])
        until(lambda: n_stored(tmp_path) == 20, 75, lambda: watch.said)
        (tmp_path / "results").rename(tmp_path / "away")
        time.sleep(1.5)
        (tmp_path / "away").rename(tmp_path / "results")
        land_files(tmp_path, made[20:])
        until(lambda: n_stored(tmp_path) == 30, 75, lambda: watch.said)
        assert watch.status()["refused"] == 0
        assert watch.end() == 0
