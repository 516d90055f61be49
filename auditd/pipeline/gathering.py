"""Taking all that has landed, once: for a backfill, a cron job, or the end of a campaign."""

from __future__ import annotations

import threading
import time
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import msgspec

from auditd.alerts.deliver import deliver_due
from auditd.landing import Landing, Progress
from auditd.landing.landing import Waiting
from auditd.pipeline.campaign import open_for_taking
from auditd.pipeline.grouping import grouped
from auditd.pipeline.session import Session, Taken
from auditd.pipeline.weighing import refresh
from auditd.store.lock import Holder
from auditd.store.sources import machine_of_sources, stored_sources

Report = Callable[[str, Progress], None]
"""Called with the step (`read` or `audit`) and the landing's running totals."""


class Gathered(msgspec.Struct, frozen=True, kw_only=True):
    """What `gather` did, and the files that it could not take yet."""

    taken: Taken
    waiting: tuple[Waiting, ...]
    n_files: int


def gather(plan_path: Path, report: Report) -> Gathered:
    """Take every file that is there and complete, give all runs their places, audit and weigh them.

    Alerts that are due are delivered, each target tried once: with a cron job nobody else does it.
    """
    campaign = open_for_taking(plan_path)
    with Holder(campaign.url, campaign.engine):
        session = Session(campaign)
        with campaign.engine.connect() as connection:
            known = list(stored_sources(connection, machine_of_sources(campaign.url)))
        landing = Landing(campaign.plan, known, settle_all=True)
        for group in grouped(landing.scan(time.time())):
            session.take_all(group, at_once=False)
            report("read", landing.progress)
        session.take_up()
        report("audit", landing.progress)
        session.advance(flush="gather ended")
        session.checkpoint()
        refresh(session)
        if campaign.plan.alerts:
            deliver_due(campaign.engine, campaign.plan, datetime.now(UTC), threading.Event())
        return Gathered(
            taken=session.totals,
            waiting=tuple(landing.waiting(time.time())),
            n_files=landing.progress.n_done,
        )
