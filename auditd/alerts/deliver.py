"""One pass over the outbox: what is due is sent, what fails waits longer each time, nothing blocks."""

from __future__ import annotations

import threading
from collections.abc import Sequence
from datetime import datetime

import msgspec
from sqlalchemy import Engine

from auditd.alerts.address_delivery import tell_address
from auditd.alerts.attempt import Attempt, failed
from auditd.alerts.backoff import is_last, wait_s
from auditd.alerts.command import tell_command
from auditd.alerts.message import Message, messages_for
from auditd.alerts.shown import one_line
from auditd.alerts.targets import alert_named
from auditd.plan import Plan
from auditd.store.clock import to_us
from auditd.store.outbox import Letter, due_letters, mark_delivered, mark_failed, postpone_letters

N_ERROR = 300
"""Characters of an error that are kept."""


class Delivered(msgspec.Struct, frozen=True, kw_only=True):
    """What a pass did, counted in letters; `n_messages` counts what was sent for those delivered."""

    n_delivered: int = 0
    n_messages: int = 0
    n_failed: int = 0
    n_dead: int = 0

    def __add__(self, other: Delivered) -> Delivered:
        return Delivered(
            **{name: getattr(self, name) + getattr(other, name) for name in self.__struct_fields__}
        )


def deliver_due(engine: Engine, plan: Plan, now: datetime, stop: threading.Event) -> Delivered:
    """Deliver what is due at `now`, target by target; ends early at a stop, and loses nothing by it.

    A letter is marked after its delivery in a transaction of its own, so that it is delivered at least once
    whatever ends the process. No connection is held while a target is waited for.
    """
    with engine.connect() as connection:
        letters = due_letters(connection, to_us(now))
    done = Delivered()
    for target in dict.fromkeys(letter.target for letter in letters):
        if stop.is_set():
            break
        mine = [letter for letter in letters if letter.target == target]
        done += _deliver_to(engine, plan, target, mine, to_us(now), stop)
    return done


def _deliver_to(
    engine: Engine, plan: Plan, target: str, letters: Sequence[Letter], now_us: int, stop: threading.Event
) -> Delivered:
    """Deliver one target's letters; after a failure the untried ones wait with it, uncounted."""
    if alert_named(plan, target) is None:
        return _give_up(engine, target, letters, now_us)
    done = Delivered()
    waiting = list(messages_for(letters))
    while waiting and not stop.is_set():
        message = waiting.pop(0)
        attempt = _tell(plan, target, message, stop)
        if attempt.outcome == "stopped":
            break
        if attempt.outcome == "delivered":
            rows = [letter.row for letter in message.letters]
            with engine.begin() as connection:
                mark_delivered(connection, rows, now_us)
            done += Delivered(n_delivered=len(rows), n_messages=1)
            continue
        done += _note_failure(engine, message, attempt, now_us, waiting)
        break
    return done


def _tell(plan: Plan, target: str, message: Message, stop: threading.Event) -> Attempt:
    alert = alert_named(plan, target)
    if alert is None:
        return failed("the plan has no such target")
    tell = tell_command if alert.to == "command" else tell_address
    return tell(alert, message, folder=plan.folder, stop=stop)


def _note_failure(
    engine: Engine, message: Message, attempt: Attempt, now_us: int, untried: Sequence[Message]
) -> Delivered:
    error = one_line(attempt.error, N_ERROR)
    first = message.letters[0]
    least = min(letter.n_tries for letter in message.letters)
    due_us = now_us + int(1e6 * wait_s(first.alert_id, least))
    dead = [letter.row for letter in message.letters if is_last(letter.n_tries)]
    living = [letter.row for letter in message.letters if not is_last(letter.n_tries)]
    with engine.begin() as connection:
        mark_failed(connection, dead, error=error, due_us=due_us, dead=True)
        mark_failed(connection, living, error=error, due_us=due_us, dead=False)
        postpone_letters(connection, [one.row for other in untried for one in other.letters], due_us)
    return Delivered(n_failed=len(living), n_dead=len(dead))


def _give_up(engine: Engine, target: str, letters: Sequence[Letter], now_us: int) -> Delivered:
    rows = [letter.row for letter in letters]
    error = f"the plan no longer has the target {one_line(target, 40)}"
    with engine.begin() as connection:
        mark_failed(connection, rows, error=error, due_us=now_us, dead=True)
    return Delivered(n_dead=len(rows))
