"""A campaign whose outbox is filled by hand, for the tests of delivery."""

import json
import pathlib
import sys
import threading
from datetime import UTC, datetime

from sqlalchemy import select
from sqlalchemy.engine import URL

from auditd.alerts.deliver import Delivered, deliver_due
from auditd.plan_reading import parse_plan
from auditd.records import Caution, Finding
from auditd.store.cautions import caution_number, save_caution
from auditd.store.clock import to_us
from auditd.store.migrate import open_or_make
from auditd.store.outbox import count_letters, due_letters, last_error, put_letter
from auditd.store.tables import outbox

NOW = datetime(2031, 5, 1, 12, 0, tzinfo=UTC)
HOSTILE = "$(touch x)`touch x`;\r\nBcc: all@example.org\x1b[31m"
PLAN = '[responses.error]\nat = "error"\n[landing]\npaths = ["landing"]\n'
KEEP = """
import json, os, sys
body = json.load(sys.stdin)
with open("got", "a") as file:
    file.write(json.dumps([sys.argv, body, dict(os.environ), os.getcwd()]) + chr(10))
"""


class Campaign:
    """A folder with a plan and a store, into whose outbox letters are put."""

    def __init__(self, folder: pathlib.Path, alerts: str) -> None:
        self.folder = folder
        self.plan = parse_plan(PLAN + alerts, folder / "plan.toml")
        self.url = URL.create("sqlite", database=str(folder / "store.sqlite"))
        self.engine = open_or_make(self.url)

    def put(self, n: int = 1, *, target: str, run: str = "r1", grade: str = "material") -> None:
        with self.engine.begin() as connection:
            start = len(connection.execute(select(outbox.c.row)).all())
            for number in range(start, start + n):
                finding = Finding(key=f"k{number}", kind="drift", message=f"run {run} drifts", run=run)
                caution = save_caution(
                    connection,
                    Caution(
                        id="", finding=finding, grade=grade, state="standing", raised_at=NOW,
                        evidence_loss=0.4, remedy="make 12 runs again",
                    ),
                    epoch=1,
                )  # fmt: skip
                body = {
                    "id": caution.id, "kind": "drift", "along": "host", "level": run, "response": "error",
                    "grade": grade, "state": "standing", "message": finding.message, "log_e": float(number),
                    "remedy": caution.remedy, "campaign": "Tides", "alert_id": f"a{number}",
                }  # fmt: skip
                put_letter(
                    connection, alert_id=f"a{number}", caution=caution_number(caution.id), target=target,
                    body=body, created_us=to_us(NOW),
                )  # fmt: skip

    def deliver(self, now: datetime = NOW, stop: threading.Event | None = None) -> Delivered:
        return deliver_due(self.engine, self.plan, now, stop or threading.Event())

    def counts(self) -> dict[str, int]:
        with self.engine.connect() as connection:
            return count_letters(connection)

    def error(self) -> str | None:
        with self.engine.connect() as connection:
            return last_error(connection)

    def due(self) -> list:
        with self.engine.connect() as connection:
            return due_letters(connection, to_us(NOW))

    def stored_bytes(self) -> bytes:
        return b"".join(file.read_bytes() for file in self.folder.glob("store.sqlite*"))


def command_campaign(folder: pathlib.Path, script: str) -> Campaign:
    """A campaign whose command is a Python program beside the plan."""
    program = folder / "tell-me"
    program.write_text(f"#!{sys.executable} -I\n{script}")
    program.chmod(0o755)
    return Campaign(folder, '[[alerts]]\nto = "command"\nargv = ["./tell-me", "$(touch x)", "a b"]\n')


def url_campaign(folder: pathlib.Path, address: str) -> Campaign:
    secret = folder / "alert-url"
    secret.write_text(address + "\n")
    secret.chmod(0o600)
    return Campaign(folder, '[[alerts]]\nto = "url"\nurl_file = "alert-url"\n')


def got(folder: pathlib.Path) -> list:
    return [json.loads(line) for line in (folder / "got").read_text().splitlines()]
