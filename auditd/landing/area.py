"""The folders that belong to a landing: their listings, their troubles, and how paths are stored."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator

from auditd.landing.folders import Listing, is_unchanged, list_folder
from auditd.landing.mounts import Mounts
from auditd.landing.names import Names, is_temporary
from auditd.landing.pending import Pending
from auditd.landing.seen import Memory, join, split
from auditd.plan import Plan
from auditd.read import storable


class Area:
    """Lists the landing's folders, and turns real paths into stored ones and back.

    A path is stored relative to the plan's folder where it lies within, or beside it by `..`; bytes that
    are not UTF-8 are escaped. Links within the landing are not followed.

    Attributes
    ----------
    roots : absolute paths of the folders (or files) that `landing.paths` names.
    troubles : folders that cannot be listed, and since when.
    all_dirty : whether everything has to be listed again.
    """

    def __init__(self, plan: Plan, suffixes: frozenset[str]) -> None:
        self._base = os.path.abspath(plan.folder)
        self.roots = tuple(os.path.normpath(os.path.join(self._base, path)) for path in plan.landing.paths)
        self._names = Names(plan.landing.match, suffixes)
        self._listings: dict[str, Listing] = {}
        self._unspoken: dict[str, str] = {}
        self.troubles: dict[str, Pending] = {}
        self.all_dirty = True
        self._dirty: set[str] = set()
        self.mounts = Mounts()

    @property
    def n_folders(self) -> int:
        """How many folders were listed."""
        return len(self._listings)

    def real(self, stored: str) -> str:
        """Return the path to open."""
        path = self._unspoken.get(stored, stored)
        return path if path.startswith("/") else f"{self._base}/{path}"

    def stored(self, real: str) -> str | None:
        """Return the stored path of a result file, or None for what does not belong to the landing."""
        path = os.path.normpath(os.path.join(self._base, real))
        for root in self.roots:
            if path == root:
                return self._stored(path)
            inner = path.removeprefix(root.rstrip("/") + "/")
            if inner == path:
                continue
            parts = inner.split("/")
            if not any(map(is_temporary, parts[:-1])) and self._names.takes(parts[-1], inner):
                return self._stored(path)
        return None

    def _stored(self, real: str) -> str:
        relative = os.path.relpath(real, self._base)
        relative = "" if relative == "." else relative
        stored = storable(relative)
        if stored != relative:
            self._unspoken[stored] = relative
        return stored

    def _named(self, folder: str, real: str, name: str) -> str:
        """Return the stored path of a name in a folder."""
        return join(folder, name) if name.isascii() else self._stored(os.path.join(real, name))

    def distrust(self, folder: str | None) -> None:
        """Have a folder, or everything, listed anew."""
        if folder is None:
            self.all_dirty = True
        else:
            self._dirty.add(os.path.normpath(os.path.join(self._base, folder)))

    def take_dirty(self) -> list[str]:
        """Return the folders that have to be listed anew, and forget them."""
        dirty, self._dirty = sorted(self._dirty), set()
        return dirty

    def list_new(self, folders: Iterable[str] | None, memory: Memory, now: float) -> Iterator[str]:
        """Yield stored paths of result files that are not known, below some folders or everywhere."""
        if folders is None:
            folders, self.all_dirty, self._dirty = self.roots, False, set()
            trusting = True
        else:
            trusting = False
        for folder in folders:
            root = next((one for one in self.roots if f"{folder}/".startswith(one.rstrip("/") + "/")), None)
            if root is not None:
                yield from self._walk(folder, root, memory, now, trusting=trusting)

    def _walk(self, top: str, root: str, memory: Memory, now: float, *, trusting: bool) -> Iterator[str]:
        stack = [top]
        while stack:
            real = stack.pop()
            stored = self._stored(real)
            trouble = self.troubles.get(stored)
            if trouble is not None and trusting and now < trouble.due:
                continue
            try:
                new, folders = self._list(real, stored, memory, now, trusting=trusting)
            except NotADirectoryError:
                if real == root and stored not in memory.names(split(stored)[0]):
                    yield stored
                continue
            except OSError as error:
                self._note(stored, real, root, error, now)
                continue
            self.troubles.pop(stored, None)
            inner = real[len(root) :].lstrip("/")
            for name in new:
                if self._names.takes(name, join(inner, name)):
                    path = self._named(stored, real, name)
                    if name.isascii() or memory.get(path) is None:
                        yield path
            stack += [os.path.join(real, name) for name in folders]

    def _list(
        self, real: str, stored: str, memory: Memory, now: float, *, trusting: bool
    ) -> tuple[list[str], tuple[str, ...]]:
        """Return a folder's new names and its folders."""
        status = os.stat(real)
        listing = self._listings.get(stored)
        if trusting and listing is not None and is_unchanged(status, listing, now):
            return [], listing.folders
        local = not self.mounts.is_remote(real)
        listing, new = list_folder(real, status, memory.names(stored), now, local=local)
        self._listings[stored] = listing
        return new, listing.folders

    def _note(self, stored: str, real: str, root: str, error: OSError, now: float) -> None:
        """Note a folder that cannot be listed; one that is gone is no trouble unless it is a root."""
        self._listings.pop(stored, None)
        if isinstance(error, FileNotFoundError) and real != root:
            self.troubles.pop(stored, None)
            return
        trouble = self.troubles.setdefault(stored, Pending(first_seen=now, still_since=now))
        trouble.fail(error, now)
        if isinstance(error, FileNotFoundError):
            trouble.due = now  # a root is looked for by every scan
