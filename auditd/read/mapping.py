"""A raw record and the plan make a Run, or a Refusal that says what is missing."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any
from zoneinfo import ZoneInfo

from auditd.errors import BadInput
from auditd.plan import Derived, Plan
from auditd.read.fields import Unfit, as_level, as_number, as_sequence, as_text, digest_of
from auditd.read.metadata import consumed_tree, without
from auditd.read.pointer import MISSING, accessor, tokens_of
from auditd.read.raw import Raw
from auditd.read.times import parse_time
from auditd.records import NOT_STATED, Level, Refusal, Run

Getter = Callable[[dict[str, Any]], Any]
_PERIOD = {"day": "%Y-%m-%d", "week": "%G-W%V", "hour": "%Y-%m-%dT%H"}
"""How a derived nuisance's levels read: the calendar day, the ISO 8601 week, the hour of that day."""


class Mapper:
    """Turns raw records into runs as a plan says; its accessors are compiled once.

    A run whose status is not among `record.completed` may lack responses; those that it has are kept. A
    record without a status, where the plan names one, is not completed. Null is a level of a factor; of a
    nuisance, a time, a seed or a sequence it means that nothing is stated.

    Parameters
    ----------
    plan : Plan
        Keys of the plan are key names, or RFC 6901 pointers when they begin with `/`.
    """

    def __init__(self, plan: Plan) -> None:
        record = plan.record
        self._text = {
            name: _text_getter(key)
            for name in ("id", "seed", "parent", "status")
            if (key := getattr(record, name)) is not None
        }
        self._stage = _getter(plan.design.stage)
        self._sequence, self._started, self._finished = map(
            _getter, (record.sequence, record.started, record.finished)
        )
        self._completed = frozenset(record.completed)
        self._zone = ZoneInfo(record.zone) if record.zone else None
        self._responses = [(name, accessor(tokens_of(one.at))) for name, one in plan.responses.items()]
        self._factors = [(name, accessor(tokens_of(key))) for name, key in plan.factors.items()]
        self._nuisance = [(name, _nuisance_getter(one)) for name, one in plan.nuisance.items()]
        self._consumed = consumed_tree(tokens_of(key) for key in _keys(plan))

    def map(self, raw: Raw | Refusal, *, path: str, generation: int = 0) -> Run | Refusal:
        """Return the run that a record states, or why it is none; never raises.

        `path` is the path as stored. `generation` counts how often the file was replaced by another one
        under its name (rotation); it enters the id only where the plan states no `record.id`.
        """
        if isinstance(raw, Refusal):
            return raw
        try:
            return self._run(raw, path, generation)
        except BadInput as error:
            reason = str(error)
        except Exception as error:  # noqa: BLE001 - one record never stops the others
            reason = f"cannot be mapped: {type(error).__name__}: {error}"
        return Refusal(
            path=path, offset=raw.offset, number=raw.number, reason=reason[:500], id=self._id_of(raw)
        )

    def _id_of(self, raw: Raw) -> str | None:
        """Return a refused record's id, if it states one that can be shown."""
        try:
            return self._text["id"](raw) if "id" in self._text else None
        except BadInput:
            return None

    def _run(self, raw: Raw, path: str, generation: int) -> Run:
        record = raw.value
        text = {name: get(raw) for name, get in self._text.items()}
        status = text.get("status")
        completed = "status" not in text or status in self._completed
        started, finished = (
            self._time(record, self._started, "started"),
            self._time(record, self._finished, "finished"),
        )
        responses = self._measured(raw, completed)
        if started is not None and finished is not None:
            responses["duration"] = (finished - started).total_seconds()
        if "status" in text:
            responses["completed"] = float(completed)
        return Run(
            id=self._run_id(raw, text, path, generation),
            path=path,
            offset=raw.offset,
            number=raw.number,
            sequence=as_sequence(self._stated(record, self._sequence)),
            started=started,
            finished=finished,
            seed=text.get("seed"),
            parent=text.get("parent"),
            status=status,
            stage=as_text(self._stated(record, self._stage), "stage"),
            completed=completed,
            cell={name: _factor(get(record), name) for name, get in self._factors},
            nuisance={
                name: self._circumstance(get, record, started, finished, name) for name, get in self._nuisance
            },
            responses=responses,
            metadata=without(record, self._consumed),
            digest=digest_of(record),
        )

    def _run_id(self, raw: Raw, text: dict[str, str | None], path: str, generation: int) -> str:
        if "id" in text:
            stated = text["id"]
            if not stated:
                raise Unfit("the id is missing")
            return stated
        return f"{path}~{generation}#{raw.number}" if generation else f"{path}#{raw.number}"

    @staticmethod
    def _stated(record: dict[str, Any], get: Getter | None) -> Any:
        value = None if get is None else get(record)
        return None if value is MISSING else value

    def _time(self, record: dict[str, Any], get: Getter | None, name: str) -> datetime | None:
        value = self._stated(record, get)
        if value is None:
            return None
        try:
            return parse_time(value, self._zone)
        except BadInput as error:
            raise Unfit(f"{name}: {error}") from None

    def _measured(self, raw: Raw, completed: bool) -> dict[str, float]:
        """Return the responses; only a run that is not completed may lack some."""
        responses = {}
        for name, get in self._responses:
            value = get(raw.value)
            try:
                responses[name] = as_number(value, name, written=raw.written is not None)
            except Unfit:
                if completed:
                    raise
        return responses

    def _circumstance(
        self,
        get: Getter | Derived,
        record: dict[str, Any],
        started: datetime | None,
        finished: datetime | None,
        name: str,
    ) -> Level:
        """Return a nuisance's level, read or derived from a time."""
        if isinstance(get, Derived):
            time = started if get.source == "started" else finished
            return (
                NOT_STATED if time is None else time.astimezone(self._zone or UTC).strftime(_PERIOD[get.by])
            )
        value = get(record)
        return NOT_STATED if value is MISSING or value is None else as_level(value, name)


def _keys(plan: Plan) -> list[str]:
    """Return every key of a record that the plan takes."""
    record = plan.record
    own = (
        record.id,
        record.sequence,
        record.started,
        record.finished,
        record.seed,
        record.parent,
        record.status,
    )
    keys = [key for key in (*own, plan.design.stage) if key is not None]
    keys += [response.at for response in plan.responses.values()]
    keys += list(plan.factors.values())
    return keys + [key for key in plan.nuisance.values() if isinstance(key, str)]


def _getter(key: str | None) -> Getter | None:
    return None if key is None else accessor(tokens_of(key))


def _nuisance_getter(key: str | Derived) -> Getter | Derived:
    return key if isinstance(key, Derived) else accessor(tokens_of(key))


def _text_getter(key: str) -> Callable[[Raw], str | None]:
    """Return a function that reads a text, as written where the format has no types of its own."""
    tokens = tokens_of(key)
    get = accessor(tokens)

    def text_of(raw: Raw) -> str | None:
        value = get(raw.value) if raw.written is None else get(raw.written)
        return as_text(None if value is MISSING else value, key)

    return text_of


def _factor(value: Any, name: str) -> Level:
    if value is MISSING:
        raise Unfit(f"factor {name} is missing")
    return as_level(value, name)
