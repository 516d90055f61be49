"""Backups under load, damaged pages, and a log that a reader keeps from being cut back."""

import contextlib
import os
import shutil
import sqlite3
import threading
import time

import pytest
from sqlalchemy import text
from sqlalchemy.engine import URL
from store_records import make_caution, make_run

from auditd.errors import CannotCreate, StoreDamaged, StoreError
from auditd.store.backup import backup_store
from auditd.store.cautions import save_caution
from auditd.store.engine import open_engine
from auditd.store.log_size import tend_log
from auditd.store.migrate import open_or_make
from auditd.store.runs import ConfigRows, count_runs, insert_runs, stored_runs
from auditd.store.verify import verify_store

PAGE_BYTES = 4096
SECRET = "s3cret"  # noqa: S105 - made up, to be looked for


@pytest.fixture
def store(tmp_path):
    """The address of a store in use, and its engine."""
    url = URL.create("sqlite", database=str(tmp_path / "store.sqlite"))
    engine = open_or_make(url)
    yield url, engine
    engine.dispose()


def insert(engine, start, n, **changed):
    with engine.begin() as connection:
        batch = [(make_run(number, **changed), True) for number in range(start, start + n)]
        insert_runs(connection, batch, landed_us=1, config_rows=ConfigRows(), first_arrival=start)


@contextlib.contextmanager
def load(engine, n_a_commit=20):
    """Insert without pause from another thread; what is inserted is told by the store."""
    stop, errors = threading.Event(), []

    def write():
        start = 0
        try:
            while not stop.is_set():
                insert(engine, start, n_a_commit)
                start += n_a_commit
        except Exception as error:  # noqa: BLE001 - looked at by the test
            errors.append(error)

    writer = threading.Thread(target=write)
    writer.start()
    try:
        yield errors
    finally:
        stop.set()
        writer.join()


@pytest.mark.slow
def test_a_hundred_backups_under_load_are_whole(store, tmp_path):
    """Each verifies, holds whole commits only, and is not behind the one before."""
    url, engine = store
    insert_before = 0
    with load(engine) as errors:
        for number in range(100):
            target = tmp_path / f"backup-{number}.sqlite"
            backup_store(url, target)
            restored = URL.create("sqlite", database=str(target))
            assert verify_store(restored) == []
            with open_engine(restored, read_only=True).connect() as connection:
                n = count_runs(connection).n
            assert n % 20 == 0
            assert n >= insert_before
            insert_before = n
            for file in tmp_path.glob("backup-*"):
                file.unlink()
    assert errors == []
    assert insert_before > 0


def test_a_backup_never_takes_the_place_of_a_file(store, tmp_path):
    """Neither of one that is there, nor of a link to nowhere; nothing is left behind."""
    url, _ = store
    there, link = tmp_path / "there", tmp_path / "link"
    there.write_text("mine")
    link.symlink_to(tmp_path / "nowhere")
    for target in (there, link):
        with pytest.raises(CannotCreate, match="not overwritten"):
            backup_store(url, target)
    with pytest.raises(CannotCreate, match="cannot be written"):
        backup_store(url, tmp_path / "missing" / "backup.sqlite")
    assert there.read_text() == "mine"
    assert not list(tmp_path.glob("*backing-up*"))


def test_a_backup_of_nothing_or_of_a_server_says_what_to_do():
    """No store; or `pg_dump`, without the password."""
    with pytest.raises(StoreError, match="no store at"):
        backup_store(URL.create("sqlite", database="/nowhere/store.sqlite"), None)
    server = URL.create("postgresql+psycopg", username="audit", password=SECRET, host="db", database="audit")
    with pytest.raises(StoreError, match="pg_dump") as caught:
        backup_store(server, None)
    assert SECRET not in str(caught.value)


def damage(file, page):
    with open(file, "r+b") as opened:
        opened.seek(page * PAGE_BYTES)
        opened.write(b"\xa5" * PAGE_BYTES)


def opened_silently(address) -> bool:
    """Whether a start sees nothing of the damage; what it says otherwise is checked."""
    try:
        open_or_make(address).dispose()
    except StoreDamaged as error:
        return "left as found" not in str(error)
    return True


def test_damaged_pages_are_found_at_start_by_verify_and_by_backup_and_left_as_found(store, tmp_path):
    """Whichever page of the file: never a silent start, never a byte changed."""
    url, engine = store
    insert(engine, 0, 3000)
    with engine.begin() as connection:
        save_caution(connection, make_caution(), epoch=1)
    engine.dispose()
    n_pages = os.stat(url.database).st_size // PAGE_BYTES
    trial = tmp_path / "trial" / "store.sqlite"
    trial.parent.mkdir()
    address = URL.create("sqlite", database=str(trial))
    n_silent = 0
    for page in range(1, n_pages, max(1, n_pages // 40)):
        shutil.copyfile(url.database, trial)
        damage(trial, page)
        before = trial.read_bytes()
        complaints = verify_store(address)
        assert complaints, page
        n_silent += opened_silently(address)
        with pytest.raises((StoreDamaged, CannotCreate)):
            backup_store(address, tmp_path / "backup.sqlite")
        assert not (tmp_path / "backup.sqlite").exists()
        assert trial.read_bytes() == before
        for end in ("-wal", "-shm"):
            (trial.parent / f"store.sqlite{end}").unlink(missing_ok=True)
    assert n_silent == 0


def test_a_broken_first_page_is_damage(store):
    """The header is gone: neither read nor made anew."""
    url, engine = store
    insert(engine, 0, 10)
    engine.dispose()
    with open(url.database, "r+b") as opened:
        opened.write(b"\x00" * 100)
    assert any("left as found" in complaint for complaint in verify_store(url))
    with pytest.raises(StoreDamaged):
        open_or_make(url)


def wal_bytes(url):
    return os.stat(f"{url.database}-wal").st_size


def test_the_log_stays_short_under_readers_that_come_and_go(store):
    """Readings overlap, so that there is always one; the log is cut back all the same."""
    url, engine = store
    reading, stop = open_engine(url, read_only=True), threading.Event()

    def read():
        while not stop.is_set():
            with reading.connect() as connection:
                for _ in stored_runs(connection):
                    pass

    readers = [threading.Thread(target=read) for _ in range(2)]
    for reader in readers:
        reader.start()
    largest, limit = 0, 2_000_000
    for start in range(0, 4000, 100):
        insert(engine, start, 100)
        tend_log(engine, limit_bytes=limit)
        largest = max(largest, wal_bytes(url))
    stop.set()
    for reader in readers:
        reader.join()
    reading.dispose()
    assert largest < 6 * limit


def test_a_reader_that_holds_a_snapshot_makes_the_writer_wait_and_never_fail(store):
    """The writer is told to wait once the log is too long; after the reader's end the log is cut back."""
    url, engine = store
    insert(engine, 0, 100)
    holding = sqlite3.connect(url.database, isolation_level=None)
    holding.execute("BEGIN")
    n_seen = holding.execute("SELECT count(*) FROM runs").fetchone()
    start, state, began = 100, tend_log(engine), time.monotonic()
    while not state.must_wait:
        insert(engine, start, 100)
        start += 100
        state = tend_log(engine, limit_bytes=500_000, pause_bytes=3_000_000)
        assert time.monotonic() - began < 60
    assert state.is_held
    assert wal_bytes(url) < 4_500_000
    assert holding.execute("SELECT count(*) FROM runs").fetchone() == n_seen
    holding.execute("COMMIT")
    state = tend_log(engine, limit_bytes=500_000, pause_bytes=3_000_000)
    assert (state.is_held, state.must_wait, wal_bytes(url)) == (False, False, 0)
    holding.close()
    insert(engine, start, 100)


def test_the_log_of_a_server_is_its_own_affair():
    """Nothing to tend."""
    from sqlalchemy import create_engine

    assert not tend_log(create_engine("postgresql+psycopg://audit@localhost/x")).must_wait


def test_a_crowd_of_short_writers_never_meets_a_locked_store(store):
    """Answers, looks and runs from several threads, each in short transactions, all get in."""
    _, engine = store
    errors = []

    def append(number):
        try:
            for _ in range(40):
                with engine.begin() as connection:
                    connection.execute(
                        text(
                            "INSERT INTO looks (looked_us, command, n_runs, body) VALUES (0, 'c', :n, '{}')"
                        ),
                        {"n": number},
                    )
        except Exception as error:  # noqa: BLE001 - looked at below
            errors.append(error)

    threads = [threading.Thread(target=append, args=(number,)) for number in range(6)]
    for thread in threads:
        thread.start()
    for start in range(0, 2000, 50):
        insert(engine, start, 50)
    for thread in threads:
        thread.join()
    assert errors == []
    with engine.connect() as connection:
        assert connection.execute(text("SELECT count(*) FROM looks")).scalar() == 240
