"""Which runs come of one another by restart."""

from __future__ import annotations


class Ancestry:
    """Links from runs to their parents; runs without a parent take no room."""

    def __init__(self) -> None:
        self.n_links = 0
        self._parents: dict[str, str] = {}

    def link(self, run: str, parent: str) -> None:
        """Note that a run continues another one, whether or not that one has landed."""
        self._parents[run] = parent
        self.n_links += 1

    def root(self, run: str) -> str:
        """Return the first run of a chain; in a cycle, the smallest id, so that all its runs agree."""
        seen: set[str] = set()
        while run in self._parents:
            if run in seen:
                return min(self._cycle(run))
            seen.add(run)
            run = self._parents[run]
        return run

    def in_cycle(self, run: str) -> bool:
        """Whether a run is, by its parents, its own ancestor."""
        at = self._parents.get(run)
        seen: set[str] = set()
        while at is not None and at not in seen:
            if at == run:
                return True
            seen.add(at)
            at = self._parents.get(at)
        return False

    def _cycle(self, run: str) -> list[str]:
        members = [run]
        at = self._parents[run]
        while at != run:
            members.append(at)
            at = self._parents[at]
        return members
