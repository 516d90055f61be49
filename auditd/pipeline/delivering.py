"""Delivery in a thread of its own, so that a slow target never keeps runs waiting."""

from __future__ import annotations

import logging
import threading
from datetime import UTC, datetime

from sqlalchemy.exc import DBAPIError

from auditd.alerts.deliver import deliver_due
from auditd.pipeline.campaign import Campaign

log = logging.getLogger("auditd")

LOOK_EVERY_S = 5.0
"""Between two looks for letters whose next try has come."""
STOP_WAIT_S = 8.0
"""How long a stop waits for a delivery under way; what is not marked is delivered again."""


class Courier:
    """Delivers the outbox of a campaign while the daemon runs.

    Parameters
    ----------
    campaign : opened for taking.
    """

    def __init__(self, campaign: Campaign) -> None:
        self._campaign = campaign
        self._wake = threading.Event()
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="courier", daemon=True)

    def start(self) -> None:
        """Begin to deliver, if the plan names a target."""
        if self._campaign.plan.alerts:
            self._thread.start()

    def wake(self) -> None:
        """Say that there is something to deliver."""
        self._wake.set()

    def stop(self) -> None:
        """End, after the delivery under way."""
        self._stop.set()
        self._wake.set()
        if self._thread.is_alive():
            self._thread.join(STOP_WAIT_S)

    def _run(self) -> None:
        while not self._stop.is_set():
            self._wake.clear()
            try:
                done = deliver_due(self._campaign.engine, self._campaign.plan, datetime.now(UTC), self._stop)
            except (DBAPIError, OSError) as error:
                log.warning("alerts wait: %s", str(getattr(error, "orig", error)).splitlines()[0])
            else:
                if done.n_failed or done.n_dead:
                    log.warning(
                        "%d alerts not delivered, %d given up; `runaudit status` says why",
                        done.n_failed,
                        done.n_dead,
                    )
            self._wake.wait(LOOK_EVERY_S)
