"""Copying a SQLite database whole while others write to it, and checking a copy."""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing
from pathlib import Path

from auditd.store.sqlite_file import connect_file

N_COMPLAINTS = 20
"""Of a damaged database so many complaints are shown; there may be one a page."""


def copy_database(source: Path, target: Path) -> None:
    """Copy a database as it is at one moment into a file that is new, and make it last.

    All pages are copied within one read transaction: copied in steps, the copying would begin anew whenever
    somebody commits.
    """
    with (
        closing(connect_file(source, read_only=True)) as reading,
        closing(sqlite3.connect(target)) as writing,
    ):
        reading.backup(writing, pages=-1)
    handle = os.open(target, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def integrity_complaints(file: Path) -> list[str]:
    """Return what SQLite finds wrong with a file's pages, indexes and foreign keys."""
    try:
        with closing(connect_file(file, read_only=True)) as connection:
            found = [row[0] for row in connection.execute(f"PRAGMA integrity_check({N_COMPLAINTS})")]
            complaints = [line for text in found if text != "ok" for line in str(text).splitlines()]
            broken = connection.execute("PRAGMA foreign_key_check").fetchmany(N_COMPLAINTS)
    except sqlite3.DatabaseError as error:
        return [f"the pages cannot be read: {error}"]
    complaints += [
        f"{table} row {row} names a row of {parent} that is not there" for table, row, parent, _ in broken
    ]
    return complaints[:N_COMPLAINTS]


def page_complaint(file: Path) -> str | None:
    """Return the first thing that is wrong with a file's pages, indexes left out: quick, for a start."""
    try:
        with closing(connect_file(file, read_only=True)) as connection:
            found = connection.execute("PRAGMA quick_check(1)").fetchone()[0]
    except sqlite3.DatabaseError as error:
        return str(error)
    return None if found == "ok" else " ".join(str(found).split())


def sync_folder(folder: Path) -> None:
    """Make a rename in a folder last."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
