"""What is remembered of every file that was taken: compact, and as the store's Source."""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import Literal

import msgspec

from auditd.records import Source


class Seen(msgspec.Struct, frozen=True, kw_only=True, array_like=True, gc=False):
    """A file as it was when it was last read; see `records.Source`.

    `generation` counts the files that have followed each other under this path, `first` is a digest of the
    first run of the present one, `context` is the reader's own. `ctime_ns` is -1 where it is not known.
    """

    device: int
    inode: int
    size: int
    mtime_ns: int
    ctime_ns: int = -1
    offset: int = 0
    n_records: int = 0
    n_head: int = 0
    head: bytes = b""
    tail: bytes = b""
    state: Literal["taken", "growing", "refused"] = "taken"
    generation: int = 0
    first: bytes = b""
    context: bytes = b""

    def is_of(self, status: os.stat_result) -> bool:
        """Whether a file is unchanged as far as its status tells."""
        return (
            self.size == status.st_size
            and self.mtime_ns == status.st_mtime_ns
            and self.inode == status.st_ino
            and self.ctime_ns == status.st_ctime_ns
        )


_pack = msgspec.msgpack.Encoder().encode
_unpack = msgspec.msgpack.Decoder(Seen).decode
_unpack_context = msgspec.msgpack.Decoder(tuple[int, int, bytes, bytes]).decode
_SHARED = ("device", "inode", "size", "mtime_ns", "offset", "n_records", "n_head", "head", "tail", "state")


def to_source(path: str, seen: Seen) -> Source:
    """Return what the store keeps of a file."""
    return Source(
        path=path,
        device=seen.device,
        inode=seen.inode,
        size=seen.size,
        mtime_ns=seen.mtime_ns,
        offset=seen.offset,
        n_records=seen.n_records,
        n_head=seen.n_head,
        head=seen.head,
        tail=seen.tail,
        context=_pack((seen.ctime_ns, seen.generation, seen.first, seen.context)),
        state=seen.state,
    )


def from_source(source: Source) -> Seen:
    """Return what a store's source says; what it does not say is found out by looking at the file.

    A refused file is looked at once more: an extra may have been installed, or a format stated, since.
    """
    shared = {name: getattr(source, name) for name in _SHARED}
    try:
        ctime_ns, generation, first, context = _unpack_context(source.context)
    except msgspec.DecodeError:
        ctime_ns, generation, first, context = -1, 0, b"", b""
    if source.state == "refused":
        ctime_ns = -1
    return Seen(ctime_ns=ctime_ns, generation=generation, first=first, context=context, **shared)


class Memory:
    """Every file that was taken, by folder and name, and by inode; about 400 bytes a file."""

    def __init__(self) -> None:
        self._folders: dict[str, dict[str, bytes]] = {}
        self._paths: dict[int, str] = {}

    def __len__(self) -> int:
        return sum(map(len, self._folders.values()))

    def names(self, folder: str) -> dict[str, bytes]:
        """Return the names that are known in a folder (not to be changed)."""
        return self._folders.get(folder, {})

    def get(self, path: str) -> Seen | None:
        """Return what is known of a file."""
        folder, name = split(path)
        packed = self._folders.get(folder, {}).get(name)
        return None if packed is None else _unpack(packed)

    def put(self, path: str, seen: Seen) -> None:
        """Remember a file."""
        folder, name = split(path)
        self._folders.setdefault(folder, {})[name] = _pack(seen)
        self._paths[seen.inode] = path

    def path_of(self, inode: int) -> str | None:
        """Return the path under which an inode was last seen."""
        return self._paths.get(inode)

    def paths(self) -> Iterator[str]:
        """Yield every path that is known at the moment, folder by folder."""
        for folder in list(self._folders):
            for name in list(self._folders[folder]):
                yield join(folder, name)


def split(path: str) -> tuple[str, str]:
    """Return a stored path's folder and name; the plan's own folder is empty."""
    folder, slash, name = path.rpartition("/")
    return (folder or slash, name)


def join(folder: str, name: str) -> str:
    """Return the stored path of a name in a folder."""
    return f"{folder}/{name}" if folder not in {"", "/"} else folder + name
