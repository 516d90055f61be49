"""Where a plan's store is, and whether that place can hold one."""

from __future__ import annotations

import hashlib
import os
import re
from pathlib import Path

from sqlalchemy.engine import URL, make_url
from sqlalchemy.exc import ArgumentError

from auditd.errors import PlanError, StoreError
from auditd.plan import Plan

NETWORK_FILESYSTEMS = frozenset(
    {"nfs", "nfs4", "cifs", "smb3", "smbfs", "9p", "afs", "ceph", "lustre", "gpfs", "beegfs", "glusterfs"}
    | {"fuse.sshfs", "fuse.glusterfs", "fuse.ceph", "ocfs2", "orangefs", "pvfs2"}
)
"""Filesystems on which SQLite's shared memory does not hold between machines (sqlite.org/wal.html)."""
_ESCAPED = re.compile(r"\\([0-7]{3})")
"""How mountinfo writes blanks, tabs, line breaks and backslashes (proc(5))."""


def store_url(plan: Plan) -> URL:
    """Return the address of the plan's store; relative SQLite paths start from the plan's folder.

    Raises
    ------
    PlanError
        `store.url` is not an address of SQLite or PostgreSQL.
    StoreError
        The SQLite file lies on a network filesystem.
    """
    if plan.store.url is None:
        return URL.create("sqlite", database=str(_default_file(plan)))
    try:
        url = make_url(plan.store.url)
    except ArgumentError as error:
        raise PlanError(
            f"store.url: {error}; write sqlite:///audit.sqlite or postgresql+psycopg://…"
        ) from error
    if url.get_backend_name() == "postgresql":
        return url.set(drivername="postgresql+psycopg")
    if url.get_backend_name() != "sqlite" or not url.database:
        raise PlanError(
            f"store.url: {url.drivername!r} is not known; write sqlite:///audit.sqlite or postgresql+psycopg://…"
        )
    file = plan.folder / url.database
    kind = filesystem_of(Path(os.path.realpath(file)).parent)
    if kind in NETWORK_FILESYSTEMS:
        raise StoreError(
            f"the store {file} is on a network filesystem ({kind}), where SQLite loses data; "
            "name a local file in store.url, or a PostgreSQL server"
        )
    return URL.create("sqlite", database=str(file))


def filesystem_of(folder: Path) -> str:
    """Return the type of the filesystem that holds a folder, or of its nearest existing parent."""
    folder = Path(os.path.realpath(folder))
    try:
        lines = Path("/proc/self/mountinfo").read_text(encoding="utf-8", errors="replace").splitlines()
    except OSError:
        return "unknown"
    best, found = -1, "unknown"
    for line in lines:
        head, _, tail = line.partition(" - ")
        mount = _ESCAPED.sub(lambda match: chr(int(match[1], 8)), head.split()[4])
        inside = str(folder) == mount or str(folder).startswith(mount.rstrip("/") + "/")
        if inside and len(mount) >= best:
            best, found = len(mount), tail.split()[0]
    return found


def _default_file(plan: Plan) -> Path:
    beside = plan.folder / ".runaudit"
    if filesystem_of(plan.folder) not in NETWORK_FILESYSTEMS:
        return beside / "store.sqlite"
    state = Path(os.environ.get("XDG_STATE_HOME") or Path.home() / ".local" / "state")
    name = hashlib.blake2b(os.fsencode(plan.path), digest_size=8).hexdigest()
    return state / "runaudit" / name / "store.sqlite"
