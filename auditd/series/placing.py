"""Giving each run its place in the audit order, once, by what is known of it and not of its outcome.

By sequence, a run enters when every lower number has landed or been given up; by start, when a run has
landed that started or finished later than its own start plus the patience; by arrival, at once. A run
that comes after its place has passed is late and is never bet on.
"""

from __future__ import annotations

import heapq
from collections import deque
from collections.abc import Iterable

import msgspec

from auditd.plan import Plan, duration_s
from auditd.records import Run
from auditd.series.load import order_of
from auditd.store.clock import to_us
from auditd.store.runs import StoredRun

N_DURATIONS = 200
"""Durations from which `patience = "auto"` is taken: the newest so many runs."""
N_DURATIONS_MIN = 20
"""Nothing enters by start before so many durations are known."""
PATIENCE_FACTOR = 1.5
"""Automatic patience is so many times the longest of the newest durations."""
PATIENCE_MIN_S = 60.0
"""The shortest silence after which waiting runs are let in, when the patience is automatic."""
DURATION_MAX_US = 7 * 86_400_000_000
"""Longer than a week is taken for an old file or a wrong clock, not for a duration."""
N_HIGHER = 64
"""A missing number is given up when so many higher ones have landed, unless a patience is stated."""
N_BEFORE_ZERO = 20
"""Numbering may begin at 0 or 1: number 0 is waited for until so many runs have landed."""


class Placed(msgspec.Struct, frozen=True, kw_only=True):
    """Runs that enter now, in order, and runs that came after their place had passed."""

    entered: tuple[StoredRun, ...]
    late: tuple[StoredRun, ...]


Key = tuple[int, str]


class Placer:
    """The waiting runs of a campaign, and who may enter.

    Its state is a function of the runs added in arrival order and of what `ready` and `flush` let in, so
    that it is made anew from the store after any end of the process.
    """

    def __init__(self, plan: Plan) -> None:
        self.by = order_of(plan)
        self._patience_s = None if plan.order.patience == "auto" else duration_s(plan.order.patience)
        self._waiting: list[tuple[Key, int, StoredRun]] = []
        self._durations_us: deque[int] = deque(maxlen=N_DURATIONS)
        self._watermark_us: int | None = None
        self._landed_us = 0
        self._last: Key | None = None
        self._n_seen = 0
        self._late: list[StoredRun] = []

    @property
    def n_waiting(self) -> int:
        """How many runs wait for their place."""
        return len(self._waiting)

    def patience_s(self) -> float:
        """Return for how long a run may be waited for."""
        if self._patience_s is not None:
            return self._patience_s
        longest = max(self._durations_us, default=0) / 1e6
        return max(PATIENCE_FACTOR * longest, PATIENCE_MIN_S)

    def restore(self, runs: Iterable[StoredRun]) -> None:
        """Take in the runs of the store, in arrival order, without letting any enter.

        `ready` comes next, before any `add`: it lets in what the ended process would have let in.
        """
        for run in runs:
            self._note(run)
            if run.position is not None:
                self._last = max(self._last, self._key(run)) if self._last else self._key(run)
            elif not run.late:
                self._take_in(run)

    def add(self, run: StoredRun) -> None:
        """Take in a run that has landed."""
        self._note(run)
        self._take_in(run)

    def ready(self) -> Placed:
        """Return who enters now by the rule."""
        entered = []
        while self._waiting and self._may_enter(self._waiting[0]):
            entered.append(self._pop())
        return Placed(entered=tuple(entered), late=self._take_late())

    def flush(self) -> Placed:
        """Let in all that wait, in order."""
        entered = []
        while self._waiting:
            entered.append(self._pop())
        return Placed(entered=tuple(entered), late=self._take_late())

    def _note(self, stored: StoredRun) -> None:
        run = stored.run
        self._n_seen += 1
        self._landed_us = max(self._landed_us, stored.landed_us)
        times = [to_us(at) for at in (run.started, run.finished) if at is not None]
        if times:
            self._watermark_us = max([*times, self._watermark_us or times[0]])
        if run.started is not None:
            end_us = to_us(run.finished) if run.finished is not None else stored.landed_us
            if 0 <= end_us - times[0] <= DURATION_MAX_US:
                self._durations_us.append(end_us - times[0])

    def _key(self, stored: StoredRun) -> Key:
        if self.by == "arrival":
            return (stored.arrival or 0, "")
        if self.by == "sequence":
            return (2**62 if stored.run.sequence is None else stored.run.sequence, stored.run.id)
        return (_start_us(stored.run, stored.landed_us), stored.run.id)

    def _take_in(self, run: StoredRun) -> None:
        """Let a run wait for its place, unless that has passed or it can have none."""
        key = self._key(run)
        placeless = self.by == "sequence" and run.run.sequence is None
        if placeless or (self._last is not None and key <= self._last):
            self._late.append(run)
        else:
            heapq.heappush(self._waiting, (key, run.row, run))

    def _pop(self) -> StoredRun:
        key, _, run = heapq.heappop(self._waiting)
        self._last = key
        return run

    def _take_late(self) -> tuple[StoredRun, ...]:
        late, self._late = tuple(self._late), []
        return late

    def _may_enter(self, first: tuple[Key, int, StoredRun]) -> bool:
        if self.by == "arrival":
            return True
        if self.by == "sequence":
            return self._number_is_due(first)
        if self._patience_s is None and len(self._durations_us) < N_DURATIONS_MIN:
            return False
        wait_us = int(1e6 * (self._patience_s if self._patience_s is not None else self.patience_s()))
        return self._watermark_us is not None and self._watermark_us > first[0][0] + wait_us

    def _number_is_due(self, first: tuple[Key, int, StoredRun]) -> bool:
        number = first[0][0]
        expected = 0 if self._last is None else self._last[0] + 1
        if number <= expected or (number == 1 and self._last is None and self._n_seen >= N_BEFORE_ZERO):
            return True
        if self._patience_s is not None:
            return self._landed_us >= first[2].landed_us + int(1e6 * self._patience_s)
        return len(self._waiting) > N_HIGHER


def _start_us(run: Run, landed_us: int) -> int:
    """Return when a run started; one that does not say stands where it finished, or landed."""
    stated = run.started or run.finished
    return landed_us if stated is None else to_us(stated)
