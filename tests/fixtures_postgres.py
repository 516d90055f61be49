"""A private PostgreSQL server for the tests, from the distribution's packages."""

import contextlib
import glob
import os
import pathlib
import pwd
import shutil
import socket
import subprocess
import tempfile
import time

import pytest
from sqlalchemy import create_engine, text
from sqlalchemy.engine import URL
from sqlalchemy.pool import NullPool

START_TIMEOUT_S = 60


class Server:
    """A server of its own in a temporary folder, on a free loopback port; may be stopped and started."""

    def __init__(self, programs: pathlib.Path, folder: pathlib.Path) -> None:
        self.programs = programs
        self.folder = folder
        self.account = _account()
        self.port = _free_port()
        self.n_databases = 0
        self.free: list[URL] = []

    def run(self, *argv: str, check: bool = True) -> subprocess.CompletedProcess:
        """Run a program of the server as the server's user: initdb and postgres refuse root."""
        return subprocess.run(
            argv, cwd=self.folder,
            user=self.account, group=_group(self.account), extra_groups=_extra(self.account),
            env={"PATH": os.environ["PATH"], "LC_ALL": "C.UTF-8"}, check=check, capture_output=True,
            text=True, timeout=START_TIMEOUT_S,
        )  # fmt: skip

    def create(self) -> None:
        """Make the data folder: no passwords on the loopback, no fsync, since nothing has to last."""
        self.run(
            str(self.programs / "initdb"), "-D", str(self.folder / "data"), "-U", "audit", "-A", "trust",
            "--no-sync", "-E", "UTF8", "--no-locale",
        )  # fmt: skip

    def start(self) -> None:
        """Start the server and wait until it answers."""
        settings = (
            f"-p {self.port} -k {self.folder} -c listen_addresses=127.0.0.1 -c fsync=off "
            "-c full_page_writes=off -c max_connections=60 -c shared_buffers=32MB -c jit=off"
        )
        self.run(
            str(self.programs / "pg_ctl"), "-D", str(self.folder / "data"), "-l", str(self.folder / "log"),
            "-w", "-t", str(START_TIMEOUT_S), "-o", settings, "start",
        )  # fmt: skip

    def stop(self, mode: str = "fast") -> None:
        """Stop the server; `immediate` is a crash."""
        self.run(
            str(self.programs / "pg_ctl"),
            "-D",
            str(self.folder / "data"),
            "-m",
            mode,
            "-w",
            "stop",
            check=False,
        )

    def restart(self) -> None:
        """Crash and start again."""
        self.stop("immediate")
        self.start()

    def url(self, database: str) -> URL:
        """Return the address of a database."""
        return URL.create(
            "postgresql+psycopg", username="audit", host="127.0.0.1", port=self.port, database=database
        )

    def new_database(self) -> URL:
        """Return the address of an empty database; one that was given back is emptied, which is quicker."""
        if self.free:
            url = self.free.pop()
            self._execute("postgres", _END_SESSIONS, name=url.database)
            self._execute(url.database, "DROP SCHEMA public CASCADE; CREATE SCHEMA public")
            return url
        self.n_databases += 1
        name = f"audit_{os.getpid()}_{self.n_databases}"
        self._execute("postgres", f"CREATE DATABASE {name}")
        return self.url(name)

    def _execute(self, database: str, statement: str, **values) -> None:
        engine = create_engine(self.url(database), isolation_level="AUTOCOMMIT", poolclass=NullPool)
        with engine.connect() as connection:
            connection.execute(text(statement), values)


_END_SESSIONS = "SELECT pg_terminate_backend(pid) FROM pg_stat_activity WHERE datname = :name"


@pytest.fixture(scope="session")
def postgres_server():
    """A running server for this test process; each worker of xdist has its own."""
    found = sorted(glob.glob("/usr/lib/postgresql/*/bin/initdb"), key=lambda name: int(name.split("/")[4]))
    if not found and (named := shutil.which("initdb")):
        found = [named]
    if not found:
        reason = "PostgreSQL's server is not installed; on Debian: apt-get install postgresql"
        if os.environ.get("CI") == "true":
            pytest.fail(reason)
        pytest.skip(reason)
    folder = pathlib.Path(tempfile.mkdtemp(prefix="auditd-postgres-"))
    server = Server(pathlib.Path(found[-1]).parent, folder)
    if server.account is not None:
        os.chown(folder, server.account, _group(server.account))
    try:
        server.create()
        server.start()
        yield server
    finally:
        server.stop("immediate")
        shutil.rmtree(folder, ignore_errors=True)


@pytest.fixture
def postgres_url(postgres_server):
    """The address of an empty database."""
    url = postgres_server.new_database()
    yield url
    postgres_server.free.append(url)


def _account() -> int | None:
    """Return the user under whom the server runs where we are root, else None: our own."""
    if os.geteuid() != 0:
        return None
    for name in ("postgres", "nobody"):
        with contextlib.suppress(KeyError):
            return pwd.getpwnam(name).pw_uid
    return 65534


def _group(account: int | None) -> int | None:
    return None if account is None else pwd.getpwuid(account).pw_gid


def _extra(account: int | None) -> list[int] | None:
    return None if account is None else []


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return probe.getsockname()[1]


def wait_until(question, timeout_s: float = 30.0) -> bool:
    """Ask until the answer is true or the time is over."""
    limit = time.monotonic() + timeout_s
    while time.monotonic() < limit:
        if question():
            return True
        time.sleep(0.05)
    return False
