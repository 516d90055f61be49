"""The demo: a made-up campaign landed piece by piece beside the real daemon, planted faults against found."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import msgspec

from auditd.bundled import bundled_folder
from auditd.errors import AuditdError
from auditd.pipeline.asking import Document, warnings_document
from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.gathering import gather
from auditd.simulate.playback import land_piece, pieces
from auditd.store.runs import count_runs

KEY = "6b656c70"
"""Key of the demo's randomisers, so that every showing is the same."""
WAIT_S = 30.0
"""How long a piece may take to be taken before the demo gives up."""
STOP_S = 15.0
POLL_S = 0.05

Say = Callable[[str], None]
Tell = Callable[[dict[str, Any]], None]  # one warning's document


class Planted(msgspec.Struct, frozen=True, kw_only=True):
    """A fault of the sample, and the warning that found it, if one did."""

    name: str
    what: str
    run: str
    found: str | None


class Shown(msgspec.Struct, frozen=True, kw_only=True):
    """What a showing of one edition came to."""

    n_runs: int
    planted: tuple[Planted, ...]
    warnings: tuple[Document, ...]
    unexplained: tuple[str, ...]


def show_edition(edition: str, folder: Path, say: Say, tell: Tell) -> Shown:
    """Land an edition of the sample beside a daemon in a folder, and tell of warnings as they are raised.

    Raises
    ------
    AuditdError
        The daemon ended, or does not take what lands.
    """
    source = bundled_folder("sample_logs")
    shutil.copyfile(source / edition / "plan.toml", folder / "plan.toml")
    (folder / "results").mkdir()
    told: set[str] = set()
    n_landed = 0
    with _daemon(folder) as daemon:
        for piece in pieces(source / edition):
            land_piece(piece, folder)
            n_landed += piece.n_runs
            _wait_until_taken(folder, n_landed, daemon)
            _tell_new(folder, told, tell)
    say(f"{n_landed} runs landed; the daemon was stopped, and the last runs are let in")
    os.environ.setdefault("RUNAUDIT_KEY", KEY)
    gather(folder / "plan.toml", lambda _step, _totals: None)
    _tell_new(folder, told, tell)
    return _sum_up(edition, source, folder, n_landed)


@contextmanager
def _daemon(folder: Path) -> Iterator[subprocess.Popen[bytes]]:
    environment = os.environ | {"RUNAUDIT_KEY": KEY}
    with (folder / "daemon.log").open("wb") as log:
        process = subprocess.Popen(
            [sys.executable, "-P", "-m", "auditd", "--plan", str(folder / "plan.toml"), "watch"],
            stdin=subprocess.DEVNULL,
            stdout=log,
            stderr=log,
            env=environment,
        )
        try:
            yield process
        finally:
            process.terminate()
            try:
                process.wait(STOP_S)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()


def _wait_until_taken(folder: Path, n_landed: int, daemon: subprocess.Popen[bytes]) -> None:
    deadline = time.monotonic() + WAIT_S
    while time.monotonic() < deadline:
        if daemon.poll() is not None:
            log = (folder / "daemon.log").read_text(errors="replace").strip().splitlines()
            raise AuditdError(f"the demo's daemon ended: {log[-1] if log else 'without a word'}")
        if _n_taken(folder) >= n_landed:
            return
        time.sleep(POLL_S)
    raise AuditdError(f"the demo's daemon has taken {_n_taken(folder)} of {n_landed} runs in {WAIT_S:.0f} s")


def _n_taken(folder: Path) -> int:
    if not (folder / ".runaudit" / "store.sqlite").exists():
        return 0
    with open_for_queries(folder / "plan.toml").engine.connect() as connection:
        return count_runs(connection).n


def _tell_new(folder: Path, told: set[str], tell: Tell) -> None:
    for one in warnings_document(open_for_queries(folder / "plan.toml"))["warnings"]:
        if one["id"] not in told:
            told.add(one["id"])
            tell(one)


def _sum_up(edition: str, source: Path, folder: Path, n_runs: int) -> Shown:
    raised = warnings_document(open_for_queries(folder / "plan.toml"))["warnings"]
    faults = msgspec.json.decode((source / "planted.json").read_bytes())[edition]["faults"]
    found = {fault["name"]: [one["id"] for one in raised if _is_of(one, fault)] for fault in faults}
    explained = {name for names in found.values() for name in names}
    return Shown(
        n_runs=n_runs,
        planted=tuple(
            Planted(
                name=fault["name"],
                what=fault["what"],
                run=fault["run"],
                found=found[fault["name"]][0] if found[fault["name"]] else None,
            )
            for fault in faults
        ),
        warnings=tuple(raised),
        unexplained=tuple(one["id"] for one in raised if one["id"] not in explained),
    )


def _is_of(one: Document, fault: dict[str, Any]) -> bool:  # a JSON document
    """Whether a warning is of a planted fault: its kind, and where, as far as both say."""
    if one["kind"] not in fault["kinds"] or one["state"] == "withdrawn":
        return False
    if (fault.get("says") or "") not in one["message"]:
        return False
    return all(
        fault.get(name) is None or one[name] is None or fault[name] == one[name]
        for name in ("along", "level", "response")
    )
