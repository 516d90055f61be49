"""The daemon's loop: what lands is taken, placed, audited and told, until it is asked to stop.

Signals set flags; the loop looks at them between two transactions. A step that fails because the disk is
full or the store's server is away is said once, tried again with back-off, and nothing of it is lost.
"""

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
from types import FrameType
from typing import Any

from sqlalchemy.exc import DBAPIError

from auditd.errors import AuditdError, PlanError, Unavailable
from auditd.landing import Landing, Watcher
from auditd.notify import Notifier
from auditd.pipeline.campaign import Campaign, open_for_taking
from auditd.pipeline.delivering import Courier
from auditd.pipeline.report_keeping import ReportKeeper
from auditd.pipeline.session import Session
from auditd.pipeline.silence import SilenceWatch
from auditd.pipeline.weighing import Weigher
from auditd.store.clock import now_us
from auditd.store.lock import Holder
from auditd.store.sources import stored_sources
from auditd.store.states import save_beat

log = logging.getLogger("auditd")

BEAT_EVERY_S = 5.0
"""Between two signs of life in the store."""
WAIT_MAX_S = 1.0
"""The longest sleep of the loop, so that answers and signals are seen within a second."""
RETRY_FIRST_S = 1.0
RETRY_MAX_S = 60.0
"""Back-off while the store cannot be written."""


class Daemon:
    """One watch over one campaign.

    Parameters
    ----------
    plan_path : the plan.
    """

    def __init__(self, plan_path: Path) -> None:
        self.plan_path = plan_path
        self.stop = threading.Event()
        self.reload = threading.Event()
        self.notifier = Notifier()
        self._watcher: Watcher | None = None
        self._beat_at = 0.0
        self._trouble: str | None = None

    def run(self) -> int:
        """Watch until stopped; return the exit code."""
        campaign = open_for_taking(self.plan_path)
        with _signals(self), Holder(campaign.url, campaign.engine) as holder:
            self._campaign = campaign
            self._holder = holder
            self._open(campaign)
            self._scan_first()
            self.notifier.ready()
            log.info("watching %s by %s", ", ".join(self.landing.roots), self.watcher.mode)
            try:
                return self._loop()
            finally:
                self._close()

    @property
    def watcher(self) -> Watcher:
        """The watcher of the plan in use."""
        if self._watcher is None:
            raise AuditdError("the daemon has not begun to watch; this is a mistake in the program")
        return self._watcher

    def interrupt(self) -> None:
        """End the loop's sleep; a signal handler may call it."""
        if self._watcher is not None:
            self._watcher.wake.set()

    def _open(self, campaign: Campaign) -> None:
        self.session = Session(campaign)
        with campaign.engine.connect() as connection:
            known = list(stored_sources(connection))
        self.landing = Landing(campaign.plan, known)
        self._watcher = Watcher(self.landing, campaign.plan.landing.watch)
        self.watcher.start()
        self.weigher = Weigher(self.session)
        self.report = ReportKeeper(self.session)
        self.silence = SilenceWatch(campaign.plan)
        self.courier = Courier(campaign)
        self.courier.start()

    def _scan_first(self) -> None:
        self._retrying(self._take_what_is_there)
        self._beat(force=True)

    def _take_what_is_there(self) -> None:
        self.session.take_up()
        self._take(self.landing.scan(time.time()))
        self._advance(None)

    def _loop(self) -> int:
        while not self.stop.is_set():
            if self.reload.is_set():
                self._reload()
            self.watcher.relay()
            self._retrying(self._step)
            if not self.watcher.tend(time.time()):
                log.error("watching cannot be restored: %s", self.watcher.reason)
                return 70
            self.notifier.watchdog()
            self.watcher.wake.wait(min(self.landing.wait_s(time.time()), WAIT_MAX_S))
        return 0

    def _step(self) -> None:
        self._take(self.landing.visit(time.time()))
        if self.session.is_outdated():
            self._reload()
        self.session.take_up_if_shared()
        self._advance(self._due_flush())
        self.weigher.refresh_if_due()
        self.report.refresh_if_due(time.time())
        self.silence.look(self.session, time.time())
        self._beat()

    def _take(self, batches: Iterator[Any]) -> None:  # batches of records
        for batch in batches:
            self.session.take(batch)
            self._advance(None)
            self._beat()
            self.notifier.watchdog()
            if self.stop.is_set():
                return

    def _advance(self, flush: str | None) -> None:
        n_raised = self.session.totals.n_raised
        self.session.advance(flush)
        if self.session.totals.n_raised > n_raised:
            self.courier.wake()

    def _due_flush(self) -> str | None:
        """Return why all that wait may enter: nothing has landed for as long as a run may be waited for."""
        if not self.session.placer.n_waiting:
            return None
        quiet_s = time.time() - self.session.landed_at
        patience_s = self.session.placer.patience_s()
        return f"nothing landed for {patience_s:.0f} s" if quiet_s > patience_s else None

    def _retrying(self, step: Any) -> None:  # a function of no arguments
        """Do a step; where the store cannot be written, say so once, wait, and begin anew from the store."""
        delay_s = RETRY_FIRST_S
        while not self.stop.is_set():
            try:
                if self._trouble is not None:
                    self._reopen()
                step()
            except (DBAPIError, OSError, Unavailable) as error:
                self._say_trouble(error)
                self.stop.wait(delay_s)
                delay_s = min(2 * delay_s, RETRY_MAX_S)
                self.notifier.watchdog()
            else:
                if self._trouble is not None:
                    log.warning("the store can be written again; nothing was lost")
                    self._trouble = None
                    self._beat(force=True)
                return

    def _say_trouble(self, error: Exception) -> None:
        reason = str(getattr(error, "orig", error)).splitlines()[0]
        if reason != self._trouble:
            log.error("paused: %s; trying again until it works, nothing is lost", reason)
        self._trouble = reason

    def _reopen(self) -> None:
        """Make everything in memory anew from the store, and distrust what the landing remembers."""
        self.session.reopen()
        with self._campaign.engine.connect() as connection:
            known = list(stored_sources(connection))
        self.watcher.stop()
        self.landing = Landing(self._campaign.plan, known)
        self._watcher = Watcher(self.landing, self._campaign.plan.landing.watch)
        self.watcher.start()
        self.weigher = Weigher(self.session)

    def _reload(self) -> None:
        """Read the plan again; one that is invalid is refused, and the old one kept."""
        self.reload.clear()
        self.notifier.reloading()
        try:
            campaign = open_for_taking(self.plan_path)
            if campaign.url != self._campaign.url:
                raise PlanError("store.url changed; end the daemon and start it again for another store")
            Session(campaign)
        except AuditdError as error:
            log.error(  # noqa: TRY400 - one line for the operator, no traceback
                "the plan was not taken into use, the old one stays: %s", error
            )
        else:
            self._close(final=False)
            self._campaign = campaign
            self._open(campaign)
            self._scan_first()
            log.info("the plan was read again")
        self.notifier.ready()

    def _beat(self, *, force: bool = False) -> None:
        now = time.monotonic()
        if not force and now - self._beat_at < BEAT_EVERY_S:
            return
        self._beat_at = now
        waiting = [
            {"path": one.path, "age_s": one.age_s, "why": one.why}
            for one in self.landing.waiting(time.time())[:20]
        ]
        self._save_beat(
            {
                "watch": self.watcher.mode,
                "reason": self.watcher.reason,
                "trouble": self._trouble,
                "files_waiting": waiting,
            }
        )

    def _save_beat(self, body: dict[str, Any]) -> None:  # a JSON document
        with self._campaign.engine.begin() as connection:
            save_beat(
                connection,
                "auditor",
                pid=os.getpid(),
                host=socket.gethostname(),
                at_us=now_us(),
                body=body,
            )

    def _close(self, *, final: bool = True) -> None:
        self.watcher.stop()
        self.courier.stop()
        self.report.close()
        if not final:
            return
        self.notifier.stopping()
        with contextlib.suppress(DBAPIError, OSError):
            self.session.checkpoint()
            self._save_beat({"ended": True, "watch": self.watcher.mode, "reason": self.watcher.reason})


@contextlib.contextmanager
def _signals(daemon: Daemon) -> Iterator[None]:
    """Let SIGTERM and SIGINT stop, and SIGHUP read the plan again."""

    def on_stop(_number: int, _frame: FrameType | None) -> None:
        daemon.stop.set()
        daemon.interrupt()

    def on_reload(_number: int, _frame: FrameType | None) -> None:
        daemon.reload.set()
        daemon.interrupt()

    if threading.current_thread() is not threading.main_thread():
        yield
        return
    old = {
        signal.SIGTERM: signal.signal(signal.SIGTERM, on_stop),
        signal.SIGINT: signal.signal(signal.SIGINT, on_stop),
        signal.SIGHUP: signal.signal(signal.SIGHUP, on_reload),
    }
    try:
        yield
    finally:
        for number, handler in old.items():
            signal.signal(number, handler)
