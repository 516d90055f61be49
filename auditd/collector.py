"""A collector: takes what lands on one machine into a PostgreSQL store, for an auditor elsewhere."""

from __future__ import annotations

import contextlib
import logging
import os
import signal
import socket
import threading
import time
from collections.abc import Iterator, Sequence
from pathlib import Path

from auditd.errors import AuditdError, PlanError
from auditd.landing import Landing, Watcher
from auditd.notify import Notifier
from auditd.pipeline.campaign import Campaign, open_for_taking, settle_plan
from auditd.pipeline.grouping import grouped
from auditd.pipeline.pausing import TROUBLES, Pausing
from auditd.records import Batch, Refusal, Run
from auditd.store.clock import now_us
from auditd.store.collect import collect_runs
from auditd.store.plans import latest_version
from auditd.store.refusals import save_refusals
from auditd.store.sources import machine_name, save_sources, stored_sources
from auditd.store.states import save_beat

log = logging.getLogger("auditd")

BEAT_EVERY_S = 5.0
"""Between two signs of life in the store, and two looks whether the plan was amended."""
WAIT_MAX_S = 1.0
"""The longest sleep of the loop, so that signals are seen within a second."""


class Collector:
    """One machine's part of a campaign whose store is a server.

    Nothing is counted in memory: what a killed collector had committed is in the store with its offsets, and
    what it had not is read again.

    Parameters
    ----------
    plan_path : the plan; its store must be PostgreSQL.
    """

    def __init__(self, plan_path: Path) -> None:
        self.plan_path = plan_path
        self.machine = machine_name()
        self.stop = threading.Event()
        self.reload = threading.Event()
        self.notifier = Notifier()
        self._pausing = Pausing(self.stop)
        self._beat_at = 0.0
        self._watcher: Watcher | None = None

    def run(self) -> int:
        """Collect until stopped; return the exit code.

        Raises
        ------
        PlanError
            The store is no server, or the plan is not the one in use.
        """
        self._campaign = open_for_taking(self.plan_path)
        if self._campaign.url.get_backend_name() != "postgresql":
            raise PlanError("--collect-only needs a PostgreSQL store that an auditor elsewhere reads")
        if self._campaign.plan.record.id is None:
            log.warning(
                "record.id is not stated: runs are known by path and number, so that two machines' files of "
                "one path are taken for one; give each machine folders of its own name"
            )
        with self._signals():
            try:
                return self._loop()
            finally:
                if self._watcher is not None:
                    self._watcher.stop()
                self.notifier.stopping()

    def _loop(self) -> int:
        is_open = False
        while not self.stop.is_set():
            try:
                if not is_open:
                    self._open()
                    is_open = True
                if self.reload.is_set():
                    self._reload()
                if not self._step():
                    return 70
            except TROUBLES as error:
                is_open = False
                self._pausing.wait_after(error)
            else:
                self._pausing.over()
            self.notifier.watchdog()
        return 0

    def _open(self) -> None:
        """Begin to watch from what the store knows, and take all that is there."""
        campaign = self._campaign
        settle_plan(campaign)
        with campaign.engine.connect() as connection:
            known = list(stored_sources(connection, self.machine))
        if self._watcher is not None:
            self._watcher.stop()
        self.landing = Landing(campaign.plan, known)
        self._watcher = Watcher(self.landing, campaign.plan.landing.watch)
        self._watcher.start()
        for group in grouped(self.landing.scan(time.time())):
            self._take(group)
            if self.stop.is_set():
                return
        self._beat(self._watcher, force=True)
        self.notifier.ready()
        log.info("collecting %s for an auditor elsewhere", ", ".join(self.landing.roots))

    def _step(self) -> bool:
        """Take what is due and wait for more; False when watching cannot be restored."""
        watcher = self._watcher
        if watcher is None:
            return True
        watcher.relay()
        for group in grouped(self.landing.visit(time.time())):
            self._take(group)
            self._beat(watcher)
            if self.stop.is_set():
                return True
        self._beat(watcher)
        if not watcher.tend(time.time()):
            log.error("watching cannot be restored: %s", watcher.reason)
            return False
        watcher.wake.wait(min(self.landing.wait_s(time.time()), WAIT_MAX_S))
        return True

    def _take(self, batches: Sequence[Batch]) -> None:
        at_us = now_us()
        found = [one for batch in batches for one in _with_order(batch)]
        refused = [item for batch in batches for item in batch.items if isinstance(item, Refusal)]
        with self._campaign.engine.begin() as connection:
            collected = collect_runs(connection, found, landed_us=at_us)
            save_refusals(connection, [*refused, *collected.rewritten], at_us, taken_up=False)
            save_sources(connection, [batch.source for batch in batches], self.machine)

    def _beat(self, watcher: Watcher, *, force: bool = False) -> None:
        now = time.monotonic()
        if not force and now - self._beat_at < BEAT_EVERY_S:
            return
        self._beat_at = now
        body = {"watch": watcher.mode, "reason": watcher.reason}
        with self._campaign.engine.begin() as connection:
            latest = latest_version(connection)
            save_beat(
                connection,
                f"collector@{self.machine}",
                pid=os.getpid(),
                host=socket.gethostname(),
                at_us=now_us(),
                body=body,
            )
        if latest is not None and latest[1] != self._campaign.plan.audited_hash:
            self.reload.set()
        self.notifier.watchdog()

    def _reload(self) -> None:
        """Read the plan again, at SIGHUP or after an amendment; one that is not in use ends the collector.

        Raises
        ------
        PlanError
            The plan was amended, and this machine's copy is another one: what it would read of new files is
            not what is audited.
        """
        self.reload.clear()
        try:
            campaign: Campaign = open_for_taking(self.plan_path)
            settle_plan(campaign)
        except AuditdError as error:
            with self._campaign.engine.connect() as connection:
                latest = latest_version(connection)
            if latest is not None and latest[1] != self._campaign.plan.audited_hash:
                raise
            log.error(  # noqa: TRY400 - one line for the operator, no traceback
                "the plan was not taken into use, the old one stays: %s", error
            )
            return
        self._campaign = campaign
        self._open()

    @contextlib.contextmanager
    def _signals(self) -> Iterator[None]:
        """Let SIGTERM and SIGINT stop, and SIGHUP read the plan again."""

        def on_stop(_number: int, _frame: object) -> None:
            self.stop.set()
            self._wake()

        def on_reload(_number: int, _frame: object) -> None:
            self.reload.set()
            self._wake()

        wanted = {signal.SIGTERM: on_stop, signal.SIGINT: on_stop, signal.SIGHUP: on_reload}
        old = {number: signal.signal(number, handler) for number, handler in wanted.items()}
        try:
            yield
        finally:
            for number, handler in old.items():
                signal.signal(number, handler)

    def _wake(self) -> None:
        if self._watcher is not None:
            self._watcher.wake.set()


def _with_order(batch: Batch) -> list[tuple[Run, bool]]:
    """Return a batch's runs; those of one table that landed whole are in no order."""
    found = [item for item in batch.items if isinstance(item, Run)]
    ordered = batch.change == "append" or len(found) <= 1
    return [(run, ordered) for run in found]
