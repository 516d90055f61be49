"""An older store: backed up, migrated under a lock, also with two starters and a kill at any statement."""

import os
import pathlib
import shutil
import signal
import sqlite3
import stat
import tempfile

import pytest
from schema_versions import NEXT, as_next_release, die_at_call, die_at_statement, folder_of_next, in_child
from sqlalchemy import create_engine, text
from sqlalchemy.engine import URL
from store_records import make_run

from auditd.errors import CannotCreate, StoreDamaged, StoreError, StoreHeld, StoreNewer
from auditd.store.engine import open_engine
from auditd.store.lock import Holder
from auditd.store.looks import save_look
from auditd.store.migrate import open_or_make, upgrade_store
from auditd.store.runs import ConfigRows, count_runs, insert_runs
from auditd.store.tables import REVISION


@pytest.fixture
def migrations(tmp_path):
    """The migrations of a later release."""
    return folder_of_next(tmp_path, REVISION)


@pytest.fixture
def old(tmp_path):
    """A store of this release, with runs in its file and a last look only in its log, as a kill leaves it."""
    file = tmp_path / "old" / "store.sqlite"
    url = URL.create("sqlite", database=str(file))
    engine = open_or_make(url)
    fill(engine)
    # a copy taken while a connection is open has the log beside the file
    keeping = sqlite3.connect(file)
    keeping.execute("SELECT count(*) FROM looks").fetchone()
    with engine.begin() as connection:
        save_look(connection, looked_us=2, command="in the log", n_runs=2, body={})
    killed = tmp_path / "killed" / "store.sqlite"
    killed.parent.mkdir()
    for end in ("", "-wal"):
        shutil.copyfile(f"{file}{end}", f"{killed}{end}")
    keeping.close()
    engine.dispose()
    assert os.stat(f"{killed}-wal").st_size > 0
    return killed


def fill(engine):
    with engine.begin() as connection:
        batch = [(make_run(number), True) for number in range(50)]
        insert_runs(connection, batch, landed_us=1, config_rows=ConfigRows(), first_arrival=0)
        save_look(connection, looked_us=1, command="in the file", n_runs=1, body={})


def url_of(file):
    return URL.create("sqlite", database=str(file))


def assert_migrated(file):
    with sqlite3.connect(f"file:{file}?mode=ro", uri=True) as connection:
        assert connection.execute("SELECT version_num FROM alembic_version").fetchall() == [(NEXT,)]
        assert connection.execute("SELECT command, remark FROM looks ORDER BY row").fetchall() == [
            ("in the file", "old"),
            ("in the log", "old"),
        ]
        assert connection.execute("SELECT count(*) FROM extra").fetchone() == (3,)
        assert connection.execute("SELECT count(*) FROM runs").fetchone() == (50,)
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    connection.close()


def assert_old(file):
    with sqlite3.connect(file) as connection:
        assert connection.execute("SELECT version_num FROM alembic_version").fetchall() == [(REVISION,)]
        assert connection.execute("SELECT command FROM looks ORDER BY row").fetchall() == [
            ("in the file",),
            ("in the log",),
        ]
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    connection.close()


def test_an_older_store_is_migrated_with_what_was_in_its_log_and_kept_beside_as_it_was(old, migrations):
    """Content, rights and a whole backup; nothing of the old log is played into the new file."""
    old.chmod(0o640)
    with as_next_release(migrations):
        backup = upgrade_store(url_of(old))
        assert upgrade_store(url_of(old)) is None
        open_or_make(url_of(old)).dispose()
    assert_migrated(old)
    assert_old(backup)
    assert stat.S_IMODE(old.stat().st_mode) == 0o640
    assert stat.S_IMODE(os.stat(backup).st_mode) == 0o640


def test_a_second_migration_keeps_the_backup_of_the_first(old, migrations, tmp_path):
    """An older file put back and migrated again does not overwrite what was kept."""
    again = tmp_path / "again.sqlite"
    with as_next_release(migrations):
        first = upgrade_store(url_of(old))
        shutil.copyfile(first, again)
        kept = pathlib.Path(first).read_bytes()
        shutil.copyfile(again, old)
        second = upgrade_store(url_of(old))
    assert first != second
    assert pathlib.Path(first).read_bytes() == kept


@pytest.mark.slow
def test_a_kill_at_any_statement_leaves_the_old_store_or_the_new_one(old, migrations, tmp_path):
    """Killed before each statement and each step with files in turn; the next start always finishes."""
    ours = ("copy_database", "integrity_complaints", "_end_log", "_fold_log", "_like", "sync_folder")
    steps = (*(f"auditd.store.migrate.{name}" for name in ours), "os.replace")
    n_killed = 0
    for dying in (die_at_statement, lambda number: die_at_call(number, steps).__enter__()):
        for number in range(1, 200):
            file = tmp_path / f"trial-{n_killed}-{number}" / "store.sqlite"
            shutil.copytree(old.parent, file.parent)

            def attempt(file=file, number=number, dying=dying):
                with as_next_release(migrations):
                    dying(number)
                    upgrade_store(url_of(file))

            ended = in_child(attempt)
            if ended == 0:
                assert_migrated(file)
                shutil.rmtree(file.parent)
                break
            assert ended == -signal.SIGKILL
            n_killed += 1
            with sqlite3.connect(f"file:{file}?mode=ro", uri=True) as connection:
                revision = connection.execute("SELECT version_num FROM alembic_version").fetchone()[0]
            connection.close()
            assert revision in {REVISION, NEXT}
            with as_next_release(migrations):
                upgrade_store(url_of(file))
            assert_migrated(file)
            for backup in file.parent.glob("store.sqlite.before-*"):
                assert_old(backup)
            assert not list(file.parent.glob(".*.migrating*"))
            shutil.rmtree(file.parent)
        else:
            pytest.fail("the migration never came to its end")
    assert n_killed > 18


def test_two_starters_migrate_once(old, migrations):
    """Both go on; there is one backup."""

    def start():
        with as_next_release(migrations):
            open_or_make(url_of(old)).dispose()

    pids = []
    for _ in range(3):
        pid = os.fork()
        if pid == 0:
            try:
                start()
            except BaseException:  # noqa: BLE001 - the parent sees the code
                os._exit(1)
            os._exit(0)
        pids.append(pid)
    assert [os.waitpid(pid, 0)[1] for pid in pids] == [0, 0, 0]
    assert_migrated(old)
    assert len(list(old.parent.glob("*.before-*"))) == 1


def test_a_store_that_is_held_or_read_is_not_migrated_under_its_holder(old, migrations, monkeypatch):
    """What an older release would still write must not get lost."""
    with as_next_release(migrations):
        with Holder(url_of(old)), pytest.raises(StoreHeld):
            upgrade_store(url_of(old))
        reading = sqlite3.connect(old)
        reading.execute("BEGIN")
        reading.execute("SELECT count(*) FROM looks").fetchone()
        monkeypatch.setattr("auditd.store.migrate.BUSY_TIMEOUT_MS", 100)
        with pytest.raises(StoreHeld, match="being read"):
            upgrade_store(url_of(old))
        reading.close()
        assert_old(old)
        upgrade_store(url_of(old))
    assert_migrated(old)


def test_an_older_store_is_not_read_before_it_is_upgraded(old, migrations):
    """The command that does it is named."""
    with as_next_release(migrations), pytest.raises(StoreError, match="run `runaudit store upgrade`"):
        open_engine(url_of(old), read_only=True)


@pytest.mark.parametrize("with_log", [True, False])
@pytest.mark.parametrize("opening", ["reading", "writing", "taking"])
def test_a_newer_store_is_refused_and_untouched_byte_for_byte(old, migrations, with_log, opening):
    """Neither the file nor its log nor its folder changes, whoever opens it."""
    with as_next_release(migrations):
        upgrade_store(url_of(old))
        engine = open_engine(url_of(old))
    if with_log:
        keeping = sqlite3.connect(old)
        keeping.execute("SELECT count(*) FROM looks").fetchone()
        with engine.begin() as connection:
            connection.execute(text("INSERT INTO extra (word) VALUES ('in the log')"))
        killed = old.parent.parent / "newer" / "store.sqlite"
        killed.parent.mkdir()
        for end in ("", "-wal"):
            shutil.copyfile(f"{old}{end}", f"{killed}{end}")
        keeping.close()
        old = killed
    before = content(old.parent)
    openings = {
        "taking": open_or_make,
        "writing": open_engine,
        "reading": lambda url: open_engine(url, read_only=True),
    }
    with pytest.raises(StoreNewer, match="left untouched"):
        openings[opening](url_of(old))
    after = content(old.parent)
    if with_log:
        # the index of a log is SQLite's own, made anew from the log by whoever opens it
        after.pop("store.sqlite-shm", None)
    assert after == before


def content(folder):
    return {file.name: file.read_bytes() for file in folder.iterdir()}


@pytest.mark.parametrize(
    "body", [b"not a database at all\n" * 100, b"x", b"SQLite format 3\x00" + b"\xff" * 4096]
)
@pytest.mark.parametrize("opening", [open_engine, open_or_make])
def test_a_file_that_is_no_database_is_refused_and_left(tmp_path, body, opening):
    """Whatever it is, it is somebody's."""
    file = tmp_path / "store.sqlite"
    file.write_bytes(body)
    with pytest.raises(StoreDamaged, match="left as found"):
        opening(url_of(file))
    assert content(tmp_path) == {"store.sqlite": body}


@pytest.mark.parametrize("opening", [open_engine, open_or_make])
def test_a_database_of_another_program_is_refused_and_left(tmp_path, opening):
    """Also one that keeps its own revisions with Alembic."""
    file = tmp_path / "store.sqlite"
    with sqlite3.connect(file) as connection:
        connection.execute("CREATE TABLE alembic_version (version_num)")
        connection.execute("INSERT INTO alembic_version VALUES ('a1b2c3')")
    connection.close()
    before = content(tmp_path)
    with pytest.raises(StoreError, match="not a store of this program"):
        opening(url_of(file))
    assert content(tmp_path) == before


def test_an_empty_file_and_a_missing_folder_become_a_store(tmp_path):
    """What a touch or a fresh machine leaves."""
    (tmp_path / "empty.sqlite").touch()
    for file in (tmp_path / "empty.sqlite", tmp_path / "a" / "b %41?#" / "store.sqlite"):
        engine = open_or_make(url_of(file))
        with engine.connect() as connection:
            assert count_runs(connection).n == 0
        assert file.stat().st_size > 0


@pytest.fixture
def as_somebody_else():
    """The rights of a user who may not write everywhere: root may."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)


@pytest.fixture
def readable_folder():
    """A folder that others can reach; pytest's own are private."""
    with tempfile.TemporaryDirectory(dir="/tmp") as name:
        pathlib.Path(name).chmod(0o755)
        yield pathlib.Path(name)


def test_a_store_that_may_only_be_read_is_read_and_not_written(readable_folder, request):
    """A colleague sees `status` though the daemon is at rest; taking runs is refused with the reason."""
    file = readable_folder / "store.sqlite"
    engine = open_or_make(url_of(file))
    fill(engine)
    engine.dispose()
    readable_folder.chmod(0o555)
    file.chmod(0o444)
    before = content(readable_folder)
    request.getfixturevalue("as_somebody_else")
    reading = open_engine(url_of(file), read_only=True)
    with reading.connect() as connection:
        assert count_runs(connection).n == 50
    for opening in (open_engine, open_or_make):
        with pytest.raises(StoreError, match="read-only here"):
            opening(url_of(file))
    with pytest.raises(CannotCreate, match="cannot be written"):
        open_or_make(url_of(readable_folder / "other.sqlite"))
    with pytest.raises(CannotCreate, match="cannot be made"):
        open_or_make(url_of(readable_folder / "deeper" / "other.sqlite"))
    assert {name: body for name, body in content_readable(readable_folder).items() if name in before} == {
        name: body for name, body in before.items() if name == "store.sqlite"
    }


def content_readable(folder):
    return {
        file.name: file.read_bytes()
        for file in folder.iterdir()
        if os.access(file, os.R_OK, effective_ids=True)
    }


def test_a_server_is_migrated_in_one_transaction_whatever_kills_the_starter(postgres_url, migrations):
    """Killed before each statement in turn; the server rolls back, and the next start finishes."""
    engine = open_or_make(postgres_url)
    fill(engine)
    engine.dispose()

    def attempt(number):
        with as_next_release(migrations):
            die_at_statement(number)
            upgrade_store(postgres_url)

    plain = create_engine(postgres_url)
    n_killed = 0
    for number in range(1, 200):
        ended = in_child(lambda number=number: attempt(number))
        with plain.connect() as connection:
            revision = connection.execute(text("SELECT version_num FROM alembic_version")).scalar()
        if ended == 0:
            assert revision == NEXT
            break
        assert ended == -signal.SIGKILL
        assert revision == REVISION
        n_killed += 1
    with plain.connect() as connection:
        assert connection.execute(text("SELECT count(*) FROM extra")).scalar() == 3
        assert connection.execute(text("SELECT remark FROM looks")).scalars().all() == ["old"]
    plain.dispose()
    assert n_killed > 8


def test_a_newer_server_is_refused(postgres_url):
    """As a newer file is."""
    engine = open_or_make(postgres_url)
    with engine.begin() as connection:
        connection.exec_driver_sql("UPDATE alembic_version SET version_num = '9002'")
    engine.dispose()
    with pytest.raises(StoreNewer):
        upgrade_store(postgres_url)
