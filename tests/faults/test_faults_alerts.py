"""Alerts end to end: a daemon whose targets are a command and a server that hangs, fails and recovers."""

import json
import threading
import time
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer

import pytest
from campaigns_made import PLAN, append, lay_out, records
from kills import TELLER, asked, delivered, n_stored
from watching import Watch, until

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

ALERTS = """
[[alerts]]
to = "url"
url_file = "address"
grades = ["note", "material", "severe"]
[[alerts]]
to = "command"
argv = ["./tell"]
grades = ["note", "material", "severe"]
"""
FIELDS = {
    "id", "kind", "along", "level", "response", "grade", "state", "raised_at", "run", "index", "n", "log_e",
    "threshold", "evidence_loss", "effect", "message", "remedy", "with", "campaign", "alert_id",
}  # fmt: skip


class Target:
    """A real HTTP server that hangs, fails or takes what it is given, as it is told."""

    def __init__(self):
        target = self

        class Handler(BaseHTTPRequestHandler):
            def do_POST(self):
                target.n_asked += 1
                body = self.rfile.read(int(self.headers["Content-Length"])).decode()
                if target.mode == "hang":
                    target.released.wait(60)
                    return
                self.send_response(500 if target.mode == "fail" else 200)
                self.end_headers()
                if target.mode == "take":
                    target.taken.append(body)

            def log_message(self, *_):
                pass

        self.mode = "hang"
        self.n_asked = 0
        self.taken = []
        self.released = threading.Event()
        self._server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        self._server.daemon_threads = True
        self.port = self._server.server_address[1]
        threading.Thread(target=self._server.serve_forever, daemon=True).start()

    def close(self):
        self.released.set()
        self._server.shutdown()
        self._server.server_close()


@pytest.fixture
def target():
    one = Target()
    yield one
    one.close()


def lay_out_with_targets(folder, target):
    plan = lay_out(folder, PLAN + ALERTS)
    (folder / "tell").write_text(TELLER)
    (folder / "tell").chmod(0o755)
    (folder / "address").write_text(f"json://127.0.0.1:{target.port}/hook-s3cret\n")
    (folder / "address").chmod(0o600)
    return plan


def test_runs_are_taken_while_a_target_hangs_and_every_alert_arrives_when_it_recovers(tmp_path, target):
    """A hanging server keeps neither runs nor, for long, the other target waiting; nothing is lost."""
    plan = lay_out_with_targets(tmp_path, target)
    made = records(300, seed=7)
    made[120]["seed"] = made[110]["seed"]
    with Watch(plan) as watch:
        append(tmp_path, made[:200])
        until(lambda: target.n_asked > 0, 60, lambda: watch.said)
        began = time.monotonic()
        append(tmp_path, made[200:])
        until(lambda: n_stored(tmp_path) == 300, 10, lambda: watch.said)
        assert time.monotonic() - began < 10
        assert target.taken == []
        target.mode = "fail"
        target.released.set()
        until((tmp_path / "told.jsonl").exists, 60, lambda: watch.said)
        until(lambda: asked(tmp_path, "SELECT 1 FROM outbox WHERE error IS NOT NULL"), 60)
        target.mode = "take"
        until(lambda: target.taken, 90, lambda: asked(tmp_path, "SELECT * FROM outbox"))
        until(lambda: not asked(tmp_path, "SELECT 1 FROM outbox WHERE state <> 'delivered'"), 60)
        assert "s3cret" not in watch.said
        assert watch.end() == 0
    body = json.loads((tmp_path / "told.jsonl").read_text().splitlines()[0])
    assert set(body) >= FIELDS
    assert body["campaign"] == "Lattice relaxation"
    assert body["kind"] == "seed"
    assert body["grade"] == "material"
    assert len(delivered(tmp_path)) == len(set(delivered(tmp_path)))
    assert "Lattice relaxation" in "".join(target.taken)


def test_a_rise_in_grade_alerts_once_more_and_not_again(tmp_path, target):
    """Results that are given twice are a note at first; when they are a third of all runs it is worse."""
    target.mode = "take"
    plan = lay_out_with_targets(tmp_path, target)
    made = records(500, seed=8)
    for number in (*range(300, 304), *range(310, 500)):
        made[number]["out"] = made[number - 200]["out"]
    with Watch(plan) as watch:
        append(tmp_path, made[:305])
        repeat = "SELECT grade FROM cautions WHERE kind = 'repeat'"
        until(lambda: asked(tmp_path, repeat), 60, lambda: watch.said)
        first = asked(tmp_path, repeat)[0][0]
        until(lambda: delivered_grades(tmp_path) == [first], 60)
        append(tmp_path, made[305:])
        until(lambda: len(delivered_grades(tmp_path)) == 2, 120, lambda: asked(tmp_path, repeat))
        time.sleep(3)
        assert watch.end() == 0
    assert delivered_grades(tmp_path) == ["note", asked(tmp_path, repeat)[0][0]]
    assert asked(tmp_path, repeat)[0][0] in {"material", "severe"}


def delivered_grades(folder):
    """Return the grades under which the command was told of repeats, in order."""
    if not (folder / "told.jsonl").exists():
        return []
    told = [json.loads(line) for line in (folder / "told.jsonl").read_text().splitlines() if line]
    return [body["grade"] for body in told if body["kind"] == "repeat"]
