"""The daemon and a store that is full, read-only, damaged, newer, or held by a reader."""

import logging
import os
import shutil
import sqlite3
import subprocess
import threading
import time
from contextlib import closing, contextmanager
from functools import partial

import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit
from kills import n_stored, places, told
from watching import Watch, until

import auditd.daemon
from auditd.daemon import Daemon

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

DISK_BYTES = 24 * 2**20
ROOM_BYTES = 300 * 2**10
"""What the store finds free at first: enough for some hundred runs."""


@contextmanager
def disk(folder, n_bytes=DISK_BYTES):
    """Mount a throw-away filesystem in memory."""
    folder.mkdir()
    done = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", f"size={n_bytes}", "tmpfs", str(folder)],
        capture_output=True,
        text=True,
        check=False,
    )
    if done.returncode:
        pytest.skip(f"a filesystem of its own cannot be mounted here: {done.stderr.strip()}")
    try:
        yield folder
    finally:
        subprocess.run(["umount", "-l", str(folder)], check=True)


def lay_out_with_store(folder, store):
    return lay_out(folder, f'{PLAN}\n[store]\nurl = "sqlite:///{store}"\n')


def test_a_full_disk_pauses_the_daemon_which_says_so_once_and_goes_on_when_there_is_room(tmp_path):
    """Nothing is lost while the store's disk is full, and the warnings are those of a store with room."""
    made = records(3_000, seed=8, step_at=1_000)
    with disk(tmp_path / "disk") as small:
        folder = tmp_path / "campaign"
        plan = lay_out_with_store(folder, small / "store.sqlite")
        (folder / ".runaudit").symlink_to(small)
        with Watch(plan) as watch:
            append(folder, made[:100])
            until(lambda: n_stored(folder) == 100, tell=lambda: watch.said)
            (small / "ballast").write_bytes(bytes(shutil.disk_usage(small).free - ROOM_BYTES))
            append(folder, made[100:2_000])
            watch.await_said("paused")
            n_paused = n_stored(folder)
            append(folder, made[2_000:])
            time.sleep(5)
            assert watch.process.poll() is None
            assert watch.said.count("paused") == 1
            (small / "ballast").unlink()
            until(lambda: n_stored(folder) == len(made), 90, lambda: watch.said)
            until(lambda: "can be written again" in watch.said)
            assert watch.end() == 0
        assert n_paused < len(made)
        assert runaudit(plan, "store", "verify").returncode == 0
        assert runaudit(plan, "gather").returncode == 0
        whole = lay_out(tmp_path / "whole")
        append(tmp_path / "whole", made)
        assert runaudit(whole, "gather").returncode == 0
        assert places(folder) == places(tmp_path / "whole")
        assert told(folder) == told(tmp_path / "whole")


def test_a_read_only_store_ends_with_78_and_the_reason(tmp_path):
    """A filesystem that was mounted read-only: the daemon says so and leaves the store."""
    with disk(tmp_path / "disk") as small:
        plan = lay_out_with_store(tmp_path / "campaign", small / "store.sqlite")
        append(tmp_path / "campaign", records(20))
        assert runaudit(plan, "gather").returncode == 0
        subprocess.run(["mount", "-o", "remount,ro", str(small)], check=True)
        for command in ("watch", "gather"):
            done = runaudit(plan, command)
            assert done.returncode == 78, done.stderr
            assert "read-only" in done.stderr
        assert runaudit(plan, "status", "--json").returncode in {0, 1}


def test_a_damaged_store_is_found_at_start_left_as_found_and_built_anew_from_the_landed_files(tmp_path):
    """78 and not a byte changed; under a new address everything that landed is taken again."""
    plan = lay_out(tmp_path)
    made = records(400, seed=9)
    append(tmp_path, made)
    assert runaudit(plan, "gather").returncode == 0
    store = tmp_path / ".runaudit" / "store.sqlite"
    before = places(tmp_path)
    damaged = bytearray(store.read_bytes())
    for at in range(8 * 4096, len(damaged), 5 * 4096):
        damaged[at : at + 64] = b"\xa5" * 64
    store.write_bytes(damaged)
    for command in ("watch", "gather"):
        done = runaudit(plan, command)
        assert done.returncode == 78, done.stderr
        assert "damaged" in done.stderr
        assert "store verify" in done.stderr
        assert store.read_bytes() == damaged
    assert runaudit(plan, "store", "verify").returncode != 0
    plan.write_text(plan.read_text() + f'\n[store]\nurl = "sqlite:///{tmp_path}/anew/store.sqlite"\n')
    assert runaudit(plan, "gather").returncode == 0
    (tmp_path / ".runaudit").rename(tmp_path / "old")
    (tmp_path / ".runaudit").symlink_to(tmp_path / "anew")
    assert places(tmp_path) == before


def test_a_store_of_a_newer_release_is_refused_untouched(tmp_path):
    """78, and the file is the same byte for byte."""
    plan = lay_out(tmp_path)
    append(tmp_path, records(20))
    assert runaudit(plan, "gather").returncode == 0
    store = tmp_path / ".runaudit" / "store.sqlite"
    with closing(sqlite3.connect(store)) as connection:
        connection.execute("UPDATE alembic_version SET version_num = '9999'")
        connection.commit()
        connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    before = store.read_bytes()
    for command in ("watch", "gather", "status"):
        done = runaudit(plan, command)
        assert done.returncode == 78, done.stderr
        assert "newer" in done.stderr
    assert store.read_bytes() == before


def test_a_reader_that_holds_a_snapshot_bounds_the_log_and_never_fails_the_writer(
    tmp_path, monkeypatch, caplog
):
    """With limits of 1 and 4 MiB: the log stops growing, the daemon says why, and goes on afterwards."""
    limit, pause = 2**20, 4 * 2**20
    monkeypatch.setattr(
        auditd.daemon, "tend_log", partial(auditd.daemon.tend_log, limit_bytes=limit, pause_bytes=pause)
    )
    caplog.set_level(logging.INFO, logger="auditd")
    plan = lay_out(tmp_path)
    made = records(20_000, seed=10)
    daemon = Daemon(plan)
    ended = []
    thread = threading.Thread(target=lambda: ended.append(daemon.run()))
    append(tmp_path, made[:100])
    thread.start()
    try:
        until(lambda: n_stored(tmp_path) == 100)
        store = tmp_path / ".runaudit" / "store.sqlite"
        sizes = []
        with closing(sqlite3.connect(f"file:{store}?mode=ro", uri=True)) as reader:
            reader.execute("BEGIN")
            reader.execute("SELECT count(*) FROM runs").fetchone()
            for start in range(100, len(made), 100):
                append(tmp_path, made[start : start + 100])
                time.sleep(0.02)
                sizes.append(os.path.getsize(f"{store}-wal"))
            until(lambda: "a reader has kept" in caplog.text, 60)
            time.sleep(2)
            sizes.append(os.path.getsize(f"{store}-wal"))
            assert n_stored(tmp_path) < len(made)
            reader.execute("COMMIT")
        until(lambda: n_stored(tmp_path) == len(made), 90)
        until(lambda: os.path.getsize(f"{store}-wal") <= pause, 10)
    finally:
        daemon.stop.set()
        thread.join(20)
    assert ended == [0]
    assert pause < max(sizes) < 4 * pause
    assert "paused: database is locked" not in caplog.text
