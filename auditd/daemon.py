"""The daemon's loop: what lands is taken, placed, audited and told, until it is asked to stop.

Signals set flags; the loop looks at them between two transactions. A step that fails because the disk is
full or the store's server is away is said once, tried again with back-off, and nothing of it is lost. On a
server's store a second daemon stands by, and takes over when the first one's lock is free.
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

from auditd.errors import AuditdError, PlanError, StoreHeld, Unavailable
from auditd.landing import Landing, Watcher
from auditd.notify import Notifier
from auditd.pipeline.campaign import Campaign, open_for_taking
from auditd.pipeline.delivering import Courier
from auditd.pipeline.freeing import give_back_memory, share_arenas
from auditd.pipeline.grouping import grouped
from auditd.pipeline.pausing import TROUBLES, Pausing
from auditd.pipeline.report_keeping import ReportKeeper
from auditd.pipeline.session import Session
from auditd.pipeline.silence import SilenceWatch
from auditd.pipeline.weighing import Weigher
from auditd.store.clock import now_us
from auditd.store.lock import Holder
from auditd.store.log_size import tend_log
from auditd.store.sources import machine_of_sources, stored_sources
from auditd.store.states import save_beat

log = logging.getLogger("auditd")

BEAT_EVERY_S = 5.0
"""Between two signs of life in the store."""
WAIT_MAX_S = 1.0
"""The longest sleep of the loop, so that answers and signals are seen within a second."""
STAND_BY_LOOK_S = 2.0
"""Between two tries for the lock of a server's store that another daemon holds."""
READER_LOOK_S = 1.0
"""Between two looks whether the reader that keeps the store's log from being cut back has ended."""


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
        self._pausing = Pausing(self.stop)
        self._n_overflows_told = 0

    def run(self) -> int:
        """Watch until stopped; return the exit code."""
        share_arenas()
        campaign = open_for_taking(self.plan_path)
        self._campaign = campaign
        self._holder = Holder(campaign.url, campaign.engine)
        with _signals(self):
            try:
                self._hold()
                if self.stop.is_set():
                    return 0
                self._open(campaign, Session(campaign))
                self._scan_first()
                self.notifier.ready()
                log.info("watching %s by %s", ", ".join(self.landing.roots), self.watcher.mode)
                return self._loop()
            finally:
                self._close()
                self._holder.release()

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

    def _hold(self) -> None:
        """Take the right to audit; where another daemon has it on a server, stand by until it is free.

        Raises
        ------
        StoreHeld
            Another process holds a store that is a file.
        """
        told = False
        while not self.stop.is_set():
            try:
                self._holder.take_again()
            except StoreHeld as error:
                if self._campaign.url.get_backend_name() == "sqlite":
                    raise
                if not told:
                    log.info("standing by: %s", str(error).split(";", 1)[0])
                    self.notifier.ready("standing by")
                told = True
                self.stop.wait(STAND_BY_LOOK_S)
                self.notifier.watchdog()
            except TROUBLES as error:
                self._pausing.wait_after(error)
                self.notifier.watchdog()
            else:
                if told:
                    log.warning("taking over: the store's lock is free")
                return

    def _open(self, campaign: Campaign, session: Session) -> None:
        self.session = session
        self._watch(campaign)
        self.weigher = Weigher(self.session)
        self.report = ReportKeeper(self.session)
        self.silence = SilenceWatch(campaign.plan)
        self.courier = Courier(campaign)
        self.courier.start()

    def _watch(self, campaign: Campaign) -> None:
        """Begin to watch the landing, from what the store knows of its files."""
        with campaign.engine.connect() as connection:
            known = list(stored_sources(connection, machine_of_sources(campaign.url)))
        if self._watcher is not None:
            self._watcher.stop()
        self.landing = Landing(campaign.plan, known)
        self._watcher = Watcher(self.landing, campaign.plan.landing.watch)
        self._n_overflows_told = 0
        self._watcher.start()

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
            self._note_overflow()
            self._retrying(self._step)
            if not self.watcher.tend(time.time()):
                log.error("watching cannot be restored: %s", self.watcher.reason)
                return 70
            self.notifier.watchdog()
            self.watcher.wake.wait(min(self.landing.wait_s(time.time()), WAIT_MAX_S))
        return 0

    def _note_overflow(self) -> None:
        """Say that events were lost, once for each overflow of their queue; a rescan finds what they told."""
        n = self.watcher.n_overflows
        if n > self._n_overflows_told:
            log.warning("the queue of events overflowed: every folder is listed again, nothing is lost")
            self._n_overflows_told = n

    def _step(self) -> None:
        self._check_hold()
        self._take(self.landing.visit(time.time()))
        if self.session.is_outdated():
            self._reload()
        self.session.take_up_if_shared()
        self._advance(self._due_flush())
        if self.weigher.refresh_if_due():
            give_back_memory()
        self.report.refresh_if_due(time.time())
        self.silence.look(self.session, time.time())
        self._beat()

    def _take(self, batches: Iterator[Any]) -> None:  # batches of records
        for group in grouped(batches):
            self._await_readers()
            self._check_hold()
            self.session.take_all(group)
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

    def _check_hold(self) -> None:
        """Raise where the lock went with a server's connection: another daemon may hold it by now."""
        if not self._holder.holds():
            raise Unavailable("the store's lock went with the connection to its server")

    def _await_readers(self) -> None:
        """Write no more while a reader keeps the store's log from being cut back and it has grown large."""
        told = False
        while not self.stop.is_set():
            state = tend_log(self._campaign.engine)
            if not state.must_wait:
                return
            if not told:
                log.warning(
                    "paused: a reader has kept the store's log from being cut back, and it has grown to %d "
                    "MiB; going on when that reader ends",
                    state.n_bytes // 2**20,
                )
            told = True
            self.stop.wait(READER_LOOK_S)
            self.notifier.watchdog()

    def _retrying(self, step: Any) -> None:  # a function of no arguments
        """Do a step; where the store cannot be written, say so once, wait, and begin anew from the store."""
        while not self.stop.is_set():
            try:
                if self._pausing.reason is not None:
                    self._reopen()
                if not self.stop.is_set():
                    step()
            except TROUBLES as error:
                self._pausing.wait_after(error)
                self.notifier.watchdog()
            else:
                if self._pausing.over():
                    self._beat(force=True)
                return

    def _reopen(self) -> None:
        """Make everything in memory anew from the store, and distrust what the landing remembers."""
        self._hold()
        if self.stop.is_set():
            return
        self.session.reopen()
        self._watch(self._campaign)
        self.weigher = Weigher(self.session)

    def _reload(self) -> None:
        """Read the plan again; one that is invalid is refused, and the old one kept."""
        self.reload.clear()
        self.notifier.reloading()
        try:
            campaign = open_for_taking(self.plan_path)
            if campaign.url != self._campaign.url:
                raise PlanError("store.url changed; end the daemon and start it again for another store")
            session = Session(campaign)
        except AuditdError as error:
            log.error(  # noqa: TRY400 - one line for the operator, no traceback
                "the plan was not taken into use, the old one stays: %s", error
            )
        else:
            self._close(final=False)
            self._campaign = campaign
            self._open(campaign, session)
            self._scan_first()
            log.info("the plan was read again")
        self.notifier.ready()

    def _beat(self, *, force: bool = False) -> None:
        now = time.monotonic()
        if not force and now - self._beat_at < BEAT_EVERY_S:
            return
        self._beat_at = now
        give_back_memory(collect=False)
        waiting = [
            {"path": one.path, "age_s": one.age_s, "why": one.why}
            for one in self.landing.waiting(time.time())[:20]
        ]
        self._save_beat(
            {
                "watch": self.watcher.mode,
                "reason": self.watcher.reason,
                "trouble": self._pausing.reason,
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
        if self._watcher is None:
            return
        self._watcher.stop()
        self.courier.stop()
        self.report.close()
        if not final:
            return
        self.notifier.stopping()
        with contextlib.suppress(*TROUBLES):
            if self._holder.holds():
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
