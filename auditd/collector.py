"""A collector: takes what lands on one machine into a PostgreSQL store, for an auditor elsewhere."""

from __future__ import annotations

import contextlib
import logging
import os
import signal
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path

from sqlalchemy.exc import DBAPIError

from auditd.errors import PlanError, Unavailable
from auditd.landing import Landing, Watcher
from auditd.notify import Notifier
from auditd.pipeline.campaign import Campaign, open_for_taking, settle_plan
from auditd.records import Batch, Refusal, Run
from auditd.store.clock import now_us
from auditd.store.collect import collect_runs
from auditd.store.refusals import save_refusals
from auditd.store.sources import save_source, stored_sources
from auditd.store.states import save_beat

log = logging.getLogger("auditd")

BEAT_EVERY_S = 5.0
WAIT_MAX_S = 1.0
RETRY_FIRST_S = 1.0
RETRY_MAX_S = 60.0


class Collector:
    """One machine's part of a campaign whose store is a server.

    Parameters
    ----------
    plan_path : the plan; its store must be PostgreSQL.
    """

    def __init__(self, plan_path: Path) -> None:
        self.plan_path = plan_path
        self.machine = socket.gethostname()
        self.stop = threading.Event()
        self.notifier = Notifier()
        self._beat_at = 0.0
        self._watcher: Watcher | None = None

    def run(self) -> int:
        """Collect until stopped; return the exit code."""
        campaign = open_for_taking(self.plan_path)
        if campaign.url.get_backend_name() != "postgresql":
            raise PlanError("--collect-only needs a PostgreSQL store that an auditor elsewhere reads")
        settle_plan(campaign)
        with self._signals():
            self._open(campaign)
            self.notifier.ready()
            log.info("collecting %s for an auditor elsewhere", ", ".join(self.landing.roots))
            try:
                self._loop()
            finally:
                if self._watcher is not None:
                    self._watcher.stop()
                self.notifier.stopping()
        return 0

    def _open(self, campaign: Campaign) -> None:
        self._campaign = campaign
        with campaign.engine.connect() as connection:
            known = list(stored_sources(connection, self.machine))
        self.landing = Landing(campaign.plan, known)
        if self._watcher is not None:
            self._watcher.stop()
        self._watcher = Watcher(self.landing, campaign.plan.landing.watch)
        self._watcher.start()

    def _loop(self) -> None:
        delay_s = RETRY_FIRST_S
        failed = False
        while not self.stop.is_set():
            try:
                if failed:
                    self._open(self._campaign)
                self._step()
                failed, delay_s = False, RETRY_FIRST_S
            except (DBAPIError, OSError, Unavailable) as error:
                reason = str(getattr(error, "orig", error)).splitlines()[0]
                log.error("paused: %s; trying again until it works", reason)  # noqa: TRY400 - one line
                failed = True
                self.stop.wait(delay_s)
                delay_s = min(2 * delay_s, RETRY_MAX_S)
            self.notifier.watchdog()

    def _step(self) -> None:
        watcher = self._watcher
        if watcher is None:
            return
        watcher.relay()
        for batch in self.landing.visit(time.time()):
            self._take(batch)
            if self.stop.is_set():
                return
        self._beat(watcher)
        watcher.tend(time.time())
        watcher.wake.wait(min(self.landing.wait_s(time.time()), WAIT_MAX_S))

    def _take(self, batch: Batch) -> None:
        at_us = now_us()
        found = [item for item in batch.items if isinstance(item, Run)]
        refused = [item for item in batch.items if isinstance(item, Refusal)]
        ordered = batch.change == "append" or len(found) <= 1
        with self._campaign.engine.begin() as connection:
            collected = collect_runs(connection, [(run, ordered) for run in found], landed_us=at_us)
            save_refusals(connection, [*refused, *collected.rewritten], at_us, taken_up=False)
            save_source(connection, batch.source, self.machine)

    def _beat(self, watcher: Watcher) -> None:
        now = time.monotonic()
        if now - self._beat_at < BEAT_EVERY_S:
            return
        self._beat_at = now
        body = {"watch": watcher.mode, "reason": watcher.reason}
        with self._campaign.engine.begin() as connection:
            save_beat(
                connection,
                f"collector@{self.machine}",
                pid=os.getpid(),
                host=self.machine,
                at_us=now_us(),
                body=body,
            )

    @contextlib.contextmanager
    def _signals(self) -> Iterator[None]:
        def on_stop(_number: int, _frame: object) -> None:
            self.stop.set()
            if self._watcher is not None:
                self._watcher.wake.set()

        old = {number: signal.signal(number, on_stop) for number in (signal.SIGTERM, signal.SIGINT)}
        try:
            yield
        finally:
            for number, handler in old.items():
                signal.signal(number, handler)
