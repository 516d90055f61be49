"""Taking runs and auditing them: what is in memory beside the store, and made anew from it at any time.

Every step is one transaction that holds the runs, their places, the warnings they raise and the alerts to
deliver. If it fails, nothing of it is kept, and the session is opened again from the store.
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Sequence

import msgspec
from sqlalchemy import Connection

from auditd.checks.facts.book import FactBook
from auditd.pipeline.auditing import Audit
from auditd.pipeline.budget import shares
from auditd.pipeline.campaign import Campaign, settle_plan
from auditd.pipeline.raising import Raiser
from auditd.pipeline.replying import apply_answers
from auditd.records import Batch, Finding, Refusal, Run
from auditd.series.placing import Placed, Placer
from auditd.store.clock import now_us
from auditd.store.plans import latest_version
from auditd.store.refusals import save_refusals, stored_refusals, take_up_refusals
from auditd.store.runs import (
    ConfigRows,
    StoredRun,
    count_runs,
    give_arrivals,
    give_positions,
    insert_runs,
    last_arrived,
    mark_late,
    stored_runs,
)
from auditd.store.sources import machine_of_sources, save_sources
from auditd.store.states import save_flush
from auditd.store.tables import runs

CHECKPOINT_EVERY_RUNS = 500
"""Placed runs between two saved states; after a kill so many are audited again."""
CHECKPOINT_EVERY_S = 60.0
TABLES = (".csv", ".tsv", ".parquet", ".json")
"""Files whose rows, landing whole, tell no order; lines of a log do, since they were written one by one."""


class Taken(msgspec.Struct, kw_only=True):
    """Running totals of a session."""

    n_runs: int = 0
    n_refused: int = 0
    n_seen_before: int = 0
    n_placed: int = 0
    n_raised: int = 0


class Session:
    """One holder's work on a campaign.

    Parameters
    ----------
    campaign : opened for taking; its plan is settled here.
    """

    def __init__(self, campaign: Campaign) -> None:
        self.campaign = campaign
        self.totals = Taken()
        self.landed_at = time.time()
        self.last_run: str | None = None
        self.reopen()
        self._recall_last_landing()

    def reopen(self) -> None:
        """Make everything in memory anew from the store."""
        settle_plan(self.campaign)
        self.plan = self.campaign.plan
        with self.campaign.engine.begin() as connection:
            self._plan_version = (latest_version(connection) or (0, ""))[0]
            counts = count_runs(connection)
            self._next_arrival = counts.next_arrival
            self._next_position = counts.next_position
            self.placer = Placer(self.plan)
            self.facts = FactBook(self.plan, alarm_budget=shares(self.plan).facts)
            self._configs = ConfigRows()
            findings = self._replay(connection)
            self.raiser = Raiser(self.plan, connection)
            self.audit = Audit(self.plan, connection, self._next_position)
            if not self.audit.ordered:
                findings = [one for one in findings if not _claims_order(one)]
            self.totals.n_raised += self.raiser.raise_missing(connection, findings)
        self._n_since_checkpoint = 0
        self._checkpoint_at = time.monotonic()

    def _recall_last_landing(self) -> None:
        """Know when the last run landed: a restart is no news, and must not put off `silence`."""
        with self.campaign.engine.connect() as connection:
            last = last_arrived(connection)
        if last is not None:
            self.last_run, self.landed_at = last[0], min(last[1] / 1e6, time.time())

    def _replay(self, connection: Connection) -> list[Finding]:
        """Tell placer and facts of every stored run, in the order in which they first heard of them.

        The runs are read twice, by arrival and by place, so that they are not all in memory at once.
        """
        findings: list[Finding] = []
        for stored in stored_runs(connection, runs.c.arrival.is_not(None), with_metadata=False):
            self.placer.restore([stored])
            findings += self.facts.arrived(stored.run, stored.arrival or 0)
        placed = runs.c.position.is_not(None)
        for stored in stored_runs(connection, placed, order=runs.c.position, with_metadata=False):
            findings += self.facts.placed(stored.run, stored.position or 0)
        for kept in stored_refusals(connection, oldest_first=True):
            findings += self.facts.refused(kept.refusal)
        return findings + self.facts.standing()

    def take(self, batch: Batch, *, at_once: bool = True) -> None:
        """Take one file's new records; see `take_all`."""
        self.take_all([batch], at_once=at_once)

    def take_all(self, batches: Sequence[Batch], *, at_once: bool = True) -> None:
        """Take records, with how far their files have been read, in one transaction.

        Without `at_once` the runs are stored, and `take_up` tells of them later, in their own order.
        """
        landed_us = now_us()
        found = [one for batch in batches for one in self._with_order(batch)]
        refused = [item for batch in batches for item in batch.items if isinstance(item, Refusal)]
        with self.campaign.engine.begin() as connection:
            inserted = insert_runs(
                connection,
                found,
                landed_us=landed_us,
                config_rows=self._configs,
                first_arrival=self._next_arrival if at_once else None,
            )
            refused += inserted.rewritten
            new_refusals = save_refusals(connection, refused, landed_us, taken_up=at_once)
            save_sources(
                connection, [batch.source for batch in batches], machine_of_sources(self.campaign.url)
            )
            if at_once:
                findings = self._hear(inserted.stored, new_refusals)
                self.totals.n_raised += self.raiser.raise_facts(connection, findings)
        n_new = len(found) - len(inserted.rewritten) - inserted.n_seen_before
        if n_new and at_once:
            self._next_arrival += n_new
            self.landed_at, self.last_run = landed_us / 1e6, inserted.stored[-1].run.id
        self.totals.n_runs += n_new
        self.totals.n_refused += len(new_refusals)
        self.totals.n_seen_before += inserted.n_seen_before

    @property
    def n_arrived(self) -> int:
        """How many runs have landed."""
        return self._next_arrival

    @property
    def n_placed(self) -> int:
        """How many runs have their places."""
        return self._next_position

    def raise_outside(self, findings: list[Finding]) -> None:
        """Raise findings that come from no run, such as silence."""
        with self.campaign.engine.begin() as connection:
            self.totals.n_raised += self.raiser.raise_facts(connection, findings)

    def withdraw(self, kind: str, message: str) -> None:
        """Withdraw the standing warnings of a kind, saying why."""
        with self.campaign.engine.begin() as connection:
            self.raiser.withdraw(connection, kind, message)

    def take_up_if_shared(self) -> int:
        """Take up what collectors have inserted, where the store is a server that they can reach."""
        if self.campaign.url.get_backend_name() != "postgresql":
            return 0
        return self.take_up()

    def is_outdated(self) -> bool:
        """Whether another process took a newer version of the plan into use."""
        with self.campaign.engine.connect() as connection:
            latest = latest_version(connection)
            return latest is not None and latest[0] != self._plan_version

    def take_up(self) -> int:
        """Take up runs and refusals that are stored but not told of yet; return how many runs that were."""
        n_new = 0
        with self.campaign.engine.begin() as connection:
            findings: list[Finding] = []
            new = give_arrivals(connection, self._next_arrival, self.placer.by, with_metadata=False)
            for stored in new:
                n_new += 1
                self.last_run = stored.run.id
                self.placer.add(stored)
                findings += self.facts.arrived(stored.run, stored.arrival or 0)
            for refusal in take_up_refusals(connection):
                findings += self.facts.refused(refusal)
            findings += self.facts.standing()
            self.totals.n_raised += self.raiser.raise_facts(connection, findings)
        self._next_arrival += n_new
        if n_new:
            self.landed_at = time.time()
        return n_new

    def advance(self, flush: str | None = None) -> int:
        """Give places to the runs that may enter, audit them, raise warnings; return how many entered.

        With `flush` all that wait enter, and the reason is recorded.
        """
        placed = self.placer.flush() if flush is not None else self.placer.ready()
        if not placed.entered and not placed.late and not self._has_replies():
            return 0
        first = self._next_position
        with self.campaign.engine.begin() as connection:
            if apply_answers(connection, self.plan, first):
                self.audit = Audit(self.plan, connection, first)
            self._place(connection, placed, first)
            if flush is not None and placed.entered:
                save_flush(
                    connection, at_us=now_us(), position=first, n_runs=len(placed.entered), reason=flush
                )
            self._audit(connection, placed, first)
        self._next_position = first + len(placed.entered)
        self.totals.n_placed += len(placed.entered)
        return len(placed.entered)

    def checkpoint(self) -> None:
        """Save the audit's state, so that little is audited again after any end."""
        with self.campaign.engine.begin() as connection:
            self.audit.save(connection)
        self._n_since_checkpoint = 0
        self._checkpoint_at = time.monotonic()

    def _place(self, connection: Connection, placed: Placed, first: int) -> None:
        give_positions(connection, [(run.row, first + k) for k, run in enumerate(placed.entered)])
        mark_late(connection, [run.row for run in placed.late])

    def _audit(self, connection: Connection, placed: Placed, first: int) -> None:
        entered = [msgspec.structs.replace(run, position=first + k) for k, run in enumerate(placed.entered)]
        findings: list[Finding] = []
        for stored in entered:
            findings += self.facts.placed(stored.run, stored.position or 0)
        findings += self.facts.standing()
        if entered and not entered[0].ordered:
            findings = [one for one in findings if not _claims_order(one)]
        self.totals.n_raised += self.raiser.raise_facts(connection, findings)
        if entered and not self.audit.has_begun() and not entered[0].ordered and self.audit.ordered:
            self.audit = Audit(self.plan, connection, first)  # its first run says that there is no order
        alarms = self.audit.advance(entered)
        self.totals.n_raised += self.raiser.raise_alarms(connection, alarms)
        self._n_since_checkpoint += len(entered)
        due = time.monotonic() - self._checkpoint_at > CHECKPOINT_EVERY_S
        if self._n_since_checkpoint >= CHECKPOINT_EVERY_RUNS or (due and self._n_since_checkpoint):
            self.audit.save(connection)
            self._n_since_checkpoint = 0
            self._checkpoint_at = time.monotonic()

    def _hear(self, stored: Iterable[StoredRun], refusals: Iterable[Refusal]) -> list[Finding]:
        findings: list[Finding] = []
        for run in stored:
            self.placer.add(run)
            findings += self.facts.arrived(run.run, run.arrival or 0)
        for refusal in refusals:
            findings += self.facts.refused(refusal)
        return findings + self.facts.standing()

    def _with_order(self, batch: Batch) -> list[tuple[Run, bool]]:
        """Return a batch's runs, each with whether its place in its file says its order."""
        found = [item for item in batch.items if isinstance(item, Run)]
        ordered = self._tells_order(batch, len(found))
        return [(run, ordered) for run in found]

    def _tells_order(self, batch: Batch, n_runs: int) -> bool:
        """Whether a run's place within its file and visit says when it was made.

        With a stated sequence or time it does not matter; rows of one table that landed whole have none.
        """
        if self.placer.by != "arrival" or self.plan.order.by == "arrival":
            return True
        is_table = batch.source.path.lower().endswith(TABLES)
        return not is_table or batch.change == "append" or n_runs <= 1

    def _has_replies(self) -> bool:
        with self.campaign.engine.connect() as connection:
            return apply_answers(connection, self.plan, self._next_position, only_ask=True)


def _claims_order(finding: Finding) -> bool:
    """Whether a finding is about the order of runs, which runs of a whole table do not have."""
    return finding.kind == "order" or (finding.kind == "failure" and finding.along in {None, "order"})
