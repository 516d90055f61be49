"""Placed runs of a store made by hand, for tests of what audits them; no store behind."""

from datetime import UTC, datetime, timedelta

from store_records import make_run

from auditd.store.plans import Epoch
from auditd.store.runs import StoredRun

START = datetime(2031, 5, 1, tzinfo=UTC)


def placed(k, value, *, cell=None, host="h1", **fields):
    """Run r<k> at position k with response y."""
    run = make_run(
        k,
        cell={"c": "a"} if cell is None else cell,
        nuisance={"host": host},
        responses={"y": value},
        **({"started": START + timedelta(minutes=10 * k), "finished": None} | fields),
    )
    return StoredRun(row=k + 1, arrival=k, position=k, late=False, ordered=True, landed_us=k, run=run)


def epoch(number=1, first=0, scope=None):
    """An epoch from a position on."""
    return Epoch(
        epoch=number,
        opened_at=START,
        from_position=first,
        plan_version=1,
        key=b"k",
        reason="",
        scope=scope or {},
    )
