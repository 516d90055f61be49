"""Listing folders politely: names first, and not at all while a folder's own mtime stands still."""

from __future__ import annotations

import os
from collections.abc import Collection

import msgspec

from auditd.landing.names import is_temporary

TRUST_AGE_S = 5.0
"""A folder's mtime is trusted only if it was older than this when the folder was listed: clocks of
filesystems tick coarsely, and a name may have come within the tick after the listing."""
TRUST_FOR_S = 300.0
"""However old its mtime, a folder is listed again after this time."""


class Listing(msgspec.Struct, frozen=True, kw_only=True, gc=False):
    """What one listing of a folder found."""

    inode: int
    mtime_ns: int
    listed_at: float
    trusted: bool
    folders: tuple[str, ...]


def is_unchanged(status: os.stat_result, listing: Listing | None, now: float) -> bool:
    """Whether a folder need not be listed again."""
    return (
        listing is not None
        and listing.trusted
        and listing.mtime_ns == status.st_mtime_ns
        and listing.inode == status.st_ino
        and 0 <= now - listing.listed_at < TRUST_FOR_S
    )


def list_folder(
    path: str, status: os.stat_result, known: Collection[str], now: float, *, local: bool
) -> tuple[Listing, list[str]]:
    """Return a folder's listing, and the names of regular files that are not known.

    `status` was taken before. `local` says that the filesystem keeps folders' mtimes as it should.

    Raises
    ------
    OSError
        The folder cannot be listed.
    """
    new, folders = [], []
    with os.scandir(path) as entries:
        for entry in entries:
            name = entry.name
            if name in known or is_temporary(name):
                continue
            if entry.is_dir(follow_symlinks=False):
                folders.append(name)
            elif entry.is_file(follow_symlinks=False):
                new.append(name)
    listing = Listing(
        inode=status.st_ino,
        mtime_ns=status.st_mtime_ns,
        listed_at=now,
        trusted=local and now - status.st_mtime_ns / 1e9 > TRUST_AGE_S,
        folders=tuple(folders),
    )
    return listing, new
