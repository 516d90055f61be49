"""The sequential audit of every response: from placed runs to alarms, made anew from the store at will."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import islice

from sqlalchemy import Connection, select

from auditd.pipeline.budget import epoch_budget, shares
from auditd.pipeline.entries import Entries
from auditd.pipeline.seed_tracks import SeedTracks, seed_cells
from auditd.pipeline.tracks import Raised, Track
from auditd.plan import AUTO_RESPONSES, Plan
from auditd.sequential import Options
from auditd.series.load import response_names
from auditd.store.answers import stored_answers
from auditd.store.plans import Epoch, stored_epochs
from auditd.store.runs import StoredRun, count_runs, stored_runs
from auditd.store.states import save_checkpoint, stored_checkpoint
from auditd.store.tables import answers, runs

N_RUNS_A_BLOCK = 20_000
"""Runs read from the store and audited at once, to bound memory."""
ORDER_KINDS = ("serial", "drift", "clock")
"""Kinds that rest on the order of the runs; withheld where none can be established."""
EVERY_KIND = (*ORDER_KINDS, "spread", "batch", "lineage")


class Audit:
    """The audit of one epoch: a track a response, or two where seeds come in blocks.

    Parameters
    ----------
    plan, connection : the plan in use and its store.
    next_position : runs before it are in the store and are audited again, silently.
    from_checkpoint : begin from the saved states, and audit again only what came after them.
    """

    def __init__(
        self, plan: Plan, connection: Connection, next_position: int, *, from_checkpoint: bool = True
    ) -> None:
        self.plan = plan
        epochs = stored_epochs(connection)
        self.epoch = epochs[-1]
        in_blocks = plan.seeds.role == "block"
        self.first_position = self.epoch.from_position if in_blocks else _first_position(epochs)
        self.ordered = _is_ordered(connection, self.first_position)
        self.withheld = withheld(plan, ordered=self.ordered)
        self.responses = response_names(plan)
        asides = stored_answers(connection, answers.c.action == "set-aside")
        self._entries = Entries(plan, epochs, asides, self.first_position)
        self.tracks = self._open_tracks()
        self.seed_tracks = SeedTracks(plan, self.first_position) if in_blocks and self.tracks else None
        covered = self._resume(connection, next_position) if from_checkpoint else self.first_position
        if covered == self.first_position and self.epoch.scope and not in_blocks:
            covered = self._prime(connection)
        self.caught_up = self._catch_up(connection, covered, next_position)

    def advance(self, entered: Sequence[StoredRun]) -> list[Raised]:
        """Audit the runs that entered, in their order, and return the alarms."""
        found: list[Raised] = []
        for start in range(0, len(entered), N_RUNS_A_BLOCK):
            found += self._advance_block(entered[start : start + N_RUNS_A_BLOCK])
        return sorted(found, key=lambda raised: (raised.index, self.responses.index(raised.response)))

    def has_begun(self) -> bool:
        """Whether any run was audited in this epoch."""
        return any(track.auditor.n_runs for track in self.tracks)

    def n_scored(self) -> int:
        """Return how many runs have been scored, of the response with the most."""
        return max((track.auditor.n_scored for track in self.tracks), default=0)

    def track_of(self, response: str) -> Track | None:
        """Return the first track of a response, or None where it is not audited."""
        return next((track for track in self.tracks if track.response == response), None)

    def raised_so_far(self) -> Iterator[tuple[Track, Raised]]:
        """Yield every alarm of the epoch with its track."""
        for track in self.tracks:
            for alarm in track.auditor.alarms:
                raised = track.raised(alarm, self.epoch.epoch, self.first_position)
                yield track, self.seed_tracks.placed(track, raised) if self.seed_tracks else raised

    def save(self, connection: Connection) -> None:
        """Save the state of every track with the runs that it covers; seed blocks are made anew instead."""
        if self.seed_tracks is not None:
            return
        for track in self.tracks:
            save_checkpoint(connection, track.name, track.checkpoint(self.epoch.epoch, self.first_position))

    def _open_tracks(self) -> list[Track]:
        if set(self.withheld) >= set(EVERY_KIND):
            return []
        parts: tuple[str, ...] = ("",)
        if self.plan.seeds.role == "block":
            parts = ("block means", "within blocks") if seed_cells(self.plan) else ()
        return [
            Track(name, part, _options(self.plan, self.epoch, name, part, self.withheld, len(parts)))
            for name in self.responses
            for part in parts
        ]

    def _resume(self, connection: Connection, next_position: int) -> int:
        """Continue from saved states if all are of this epoch and one position; return what they cover."""
        saved = [stored_checkpoint(connection, track.name) for track in self.tracks]
        if not saved or self.seed_tracks is not None:
            return self.first_position
        positions = {one.position for one in saved if one is not None and one.epoch == self.epoch.epoch}
        if None in saved or len(positions) != 1 or max(positions) > next_position:
            return self.first_position
        (covered,) = positions
        if covered <= self.first_position:
            return self.first_position
        earlier = self._collect(connection, self.first_position, covered)
        for track, one in zip(self.tracks, saved, strict=True):
            if one is None or not track.resume(one, earlier.of(track.response, self.plan)):
                self.tracks = self._open_tracks()
                self._entries.restart()
                return self.first_position
        return covered

    def _prime(self, connection: Connection) -> int:
        """Let an epoch that restarted one level rank its runs among the earlier ones of the others."""
        earlier = self._collect(connection, self.first_position, self.epoch.from_position)
        for track in self.tracks:
            track.prime(earlier.of(track.response, self.plan))
        return self.epoch.from_position

    def _collect(self, connection: Connection, first: int, until: int) -> Entries:
        for block in _blocks(_placed(connection, first, until)):
            self._entries.take(block, keep=True)
        return self._entries

    def _catch_up(self, connection: Connection, covered: int, next_position: int) -> list[Raised]:
        self._entries.forget()
        placed = _placed(connection, covered, next_position)
        return [raised for block in _blocks(placed) for raised in self._advance_block(block)]

    def _advance_block(self, block: Sequence[StoredRun]) -> list[Raised]:
        if not block or not self.tracks:
            return []
        entries = self._entries.take(block)
        found: list[Raised] = []
        for track in self.tracks:
            runs_of = entries.of(track.response, self.plan)
            if self.seed_tracks is not None:
                found += self.seed_tracks.advance(track, runs_of, block, self.epoch.epoch)
            else:
                found += track.advance(runs_of, self.epoch.epoch, self.first_position)
        return found


def replayed_alarms(plan: Plan, connection: Connection) -> list[Raised]:
    """Return the alarms of the epoch in force, from its stored runs alone."""
    return Audit(plan, connection, count_runs(connection).next_position, from_checkpoint=False).caught_up


def withheld(plan: Plan, *, ordered: bool) -> tuple[str, ...]:
    """Return the kinds that cannot be asked honestly under a plan."""
    if plan.design.allocation == "outcome" and plan.design.stage is None:
        return EVERY_KIND
    return () if ordered else ORDER_KINDS


def _first_position(epochs: Sequence[Epoch]) -> int:
    """Return where the runs begin that the epoch in force ranks among: its own, or a whole restart's."""
    return max(epoch.from_position for epoch in epochs if not epoch.scope)


def _options(
    plan: Plan, epoch: Epoch, response: str, part: str, left_out: tuple[str, ...], n_parts: int
) -> Options:
    budget = shares(plan)
    added = response in AUTO_RESPONSES
    n_sharing = sum((name in AUTO_RESPONSES) == added for name in response_names(plan))
    in_blocks = bool(part)
    return Options(
        nuisances=() if part == "block means" else tuple(plan.nuisance),
        baseline="cells" if in_blocks else plan.baseline.kind,
        has_times=plan.record.started is not None or plan.record.finished is not None,
        has_parents=plan.record.parent is not None and not in_blocks,
        alarm_budget=epoch_budget(budget.added if added else budget.responses, epoch.epoch),
        n_responses=n_sharing * n_parts,
        response=f"{response} {part}".strip(),
        key=epoch.key,
        withheld=left_out,
    )


def _is_ordered(connection: Connection, first_position: int) -> bool:
    """Whether the epoch's runs have an order: its first run says; an epoch without runs may have one."""
    stated = connection.execute(select(runs.c.ordered).where(runs.c.position == first_position)).scalar()
    return stated is not False


def _placed(connection: Connection, first: int, until: int) -> Iterator[StoredRun]:
    return stored_runs(
        connection,
        runs.c.position >= first,
        runs.c.position < until,
        order=runs.c.position,
        with_metadata=False,
    )


def _blocks(found: Iterable[StoredRun]) -> Iterator[list[StoredRun]]:
    iterator = iter(found)
    while block := list(islice(iterator, N_RUNS_A_BLOCK)):
        yield block
