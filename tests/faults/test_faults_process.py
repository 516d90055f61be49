"""The daemon's manners: signals under load, what it tells systemd, silence, and clocks that step."""

import json
import os
import signal
import socket
import threading
import time
from datetime import datetime, timedelta

import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit
from kills import asked, n_stored, places
from watching import Watch, until

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

END_WITHIN_S = 10


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_asked_to_end_under_load_it_ends_within_10_s_with_0_and_the_next_one_goes_on(tmp_path, number):
    """A signal amid 20,000 runs: the daemon ends with 0 in time, and nothing is lost or taken twice."""
    plan = lay_out(tmp_path)
    made = records(20_000, seed=3)
    with Watch(plan) as watch:
        watch.await_said("watching")
        for start in range(0, len(made), 500):
            append(tmp_path, made[start : start + 500])
        until(lambda: n_stored(tmp_path) > 0)
        assert watch.end(number, END_WITHIN_S) == 0
        n_first = n_stored(tmp_path)
        watch.start()
        until(lambda: n_stored(tmp_path) == len(made), 60, lambda: watch.said)
        assert watch.end(number, END_WITHIN_S) == 0
    assert n_first < len(made), "the load was too light to show anything"
    ids = [row[0] for row in places(tmp_path)]
    assert len(set(ids)) == len(ids) == len(made)


class Listener:
    """A stand-in for systemd's end of NOTIFY_SOCKET: a real datagram socket, read from a thread."""

    def __init__(self, folder):
        self.path = str(folder / "notify")
        self.told = []
        self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM)
        self._socket.bind(self.path)
        threading.Thread(target=self._read, daemon=True).start()

    def _read(self):
        while True:
            self.told.append((time.monotonic(), self._socket.recv(4096).decode()))

    def n(self, word):
        """Count the messages with a word."""
        return sum(word in text for _, text in self.told)


def test_systemd_is_told_ready_after_the_first_scan_and_that_all_is_well_only_while_it_is(tmp_path):
    """READY comes when what was there is taken; WATCHDOG while the loop goes round, not while it hangs."""
    plan = lay_out(tmp_path)
    append(tmp_path, records(3_000, seed=4))
    listener = Listener(tmp_path)
    taken_at_ready = []
    with Watch(plan, env={"NOTIFY_SOCKET": listener.path, "WATCHDOG_USEC": "4000000"}) as watch:
        until(lambda: listener.n("READY=1"), tell=lambda: watch.said)
        taken_at_ready.append(n_stored(tmp_path))
        n = listener.n("WATCHDOG=1")
        until(lambda: listener.n("WATCHDOG=1") > n + 1)
        os.kill(watch.process.pid, signal.SIGSTOP)
        time.sleep(0.2)
        n = listener.n("WATCHDOG=1")
        time.sleep(3)
        assert listener.n("WATCHDOG=1") == n
        os.kill(watch.process.pid, signal.SIGCONT)
        until(lambda: listener.n("WATCHDOG=1") > n)
        os.kill(watch.process.pid, signal.SIGHUP)
        until(lambda: listener.n("RELOADING=1") == 1 and listener.n("READY=1") == 2)
        assert watch.end() == 0
        until(lambda: listener.n("STOPPING=1") == 1)
    assert taken_at_ready == [3_000]


def test_silence_is_raised_and_withdrawn_when_runs_land_again(tmp_path):
    """Nothing for `silence.after` is a warning, also over a restart, and the next run withdraws it."""
    plan = lay_out(tmp_path, PLAN + '\n[silence]\nafter = "3s"\n')
    made = records(20, seed=5)

    def silence():
        return [row[0] for row in asked(tmp_path, "SELECT state FROM cautions WHERE kind = 'silence'")]

    with Watch(plan) as watch:
        append(tmp_path, made[:10])
        until(lambda: n_stored(tmp_path) == 10)
        assert silence() == []
        until(lambda: silence() == ["standing"], 20, lambda: watch.said)
        watch.kill()
        watch.start()
        watch.await_said("watching")
        time.sleep(1.5)
        assert silence() == ["standing"]
        append(tmp_path, made[10:])
        until(lambda: silence()[:1] == ["withdrawn"], 20, lambda: watch.said)
        until(lambda: "standing" in silence(), 20, silence)
        assert watch.end() == 0


def test_clocks_that_step_and_disagree_are_told_and_the_stated_order_holds(tmp_path):
    """Starts that go back, ends before starts and a repeated hour: `time` facts, order by start, no crash."""
    plan = lay_out(tmp_path)
    made = records(120, seed=6)
    for run in made[60:80]:  # a clock that was set back by a day for a while
        for end in ("start", "end"):
            run["time"][end] = (datetime.fromisoformat(run["time"][end]) - timedelta(days=1)).isoformat()
    for run in made[90:93]:  # ends before starts
        run["time"]["start"], run["time"]["end"] = run["time"]["end"], run["time"]["start"]
    with Watch(plan) as watch:
        append(tmp_path, made[:60])
        until(lambda: n_stored(tmp_path) == 60)
        append(tmp_path, made[60:])
        until(lambda: n_stored(tmp_path) == 120, tell=lambda: watch.said)
        assert watch.end() == 0
    assert runaudit(plan, "gather").returncode == 0
    kinds = {row[0] for row in asked(tmp_path, "SELECT kind FROM cautions")}
    assert "time" in kinds
    placed = "SELECT id, started_us FROM runs WHERE position IS NOT NULL ORDER BY position"
    starts = [row[1] for row in asked(tmp_path, placed)]
    assert starts == sorted(starts)
    found = json.loads(runaudit(plan, "status", "--json").stdout)
    assert found["late"] == 120 - len(starts)
    assert 0 < found["late"] <= 20
