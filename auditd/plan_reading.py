"""Reading a plan: TOML to a validated `Plan`, or one error that names the key and what is expected."""

from __future__ import annotations

import difflib
import math
import os
import re
import tomllib
import types
import typing
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import msgspec

from auditd.errors import PlanError
from auditd.formula import parse_formula
from auditd.plan import AUTO_RESPONSES, Derived, Plan, Section, Tables, duration_s

RESERVED_ALONG = ("order", "machine")
_NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_.-]{0,63}")


def load_plan(path: Path) -> Plan:
    """Read and validate a plan.

    Raises
    ------
    PlanError
        The file is missing or unreadable, is not TOML, has unknown keys, or contradicts itself.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise PlanError(f"{path}: the plan cannot be read: {error}") from error
    return parse_plan(text, path)


def parse_plan(text: str, path: Path = Path("plan.toml")) -> Plan:
    """Validate the text of a plan, as `load_plan` does."""
    try:
        raw = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise PlanError(f"{path}: not TOML: {error}") from error
    _refuse_unknown(raw, Tables, "", path)
    try:
        tables = msgspec.convert(raw, Tables)
    except msgspec.ValidationError as error:
        raise PlanError(f"{path}: {_readable(str(error))}") from error
    fields = {name: getattr(tables, name) for name in Tables.__struct_fields__}
    plan = Plan(**fields, text=text, path=Path(os.path.abspath(path)))
    for complaint in _complaints(plan):
        raise PlanError(f"{path}: {complaint}")
    return plan


def _refuse_unknown(raw: Any, section: Any, where: str, path: Path) -> None:
    """Refuse keys that no section knows, naming the nearest valid one."""
    section = _section_type(section)
    if isinstance(raw, list) and typing.get_origin(section) in {list, tuple}:
        for number, item in enumerate(raw):
            _refuse_unknown(item, typing.get_args(section)[0], f"{where}[{number}]", path)
    if not isinstance(raw, dict):
        return
    if typing.get_origin(section) is dict:
        for key, value in raw.items():
            _refuse_unknown(value, typing.get_args(section)[1], f"{where}.{key}".lstrip("."), path)
    if not (isinstance(section, type) and issubclass(section, Section)):
        return
    known = {field.encode_name: field.type for field in msgspec.structs.fields(section)}
    for key, value in raw.items():
        full = f"{where}.{key}".lstrip(".")
        if key not in known:
            near = difflib.get_close_matches(key, known, n=1, cutoff=0.5)
            hint = f"did you mean {near[0]!r}?" if near else f"known here: {', '.join(known)}"
            raise PlanError(f"{path}: unknown key {full!r}; {hint}")
        _refuse_unknown(value, known[key], full, path)


def _section_type(section: Any) -> Any:
    """Return the section within `Section | None` or `str | Section`."""
    if isinstance(section, types.UnionType) or typing.get_origin(section) is typing.Union:
        inner = [part for part in typing.get_args(section) if part not in {type(None), str}]
        return inner[0] if inner else section
    return section


def _readable(message: str) -> str:
    """Turn the validator's path into the plan's own words."""
    match = re.fullmatch(r"(?P<what>.*?)(?: - at `\$\.?(?P<where>.*)`)?", message)
    if match is None or not match["where"]:
        return message.replace("Object missing", "missing").replace("field", "section")
    return f"{match['where']}: {match['what']}"


def _complaints(plan: Plan) -> typing.Iterator[str]:
    """Yield what contradicts itself in a plan that is well-formed."""
    yield from _campaign_complaints(plan)
    yield from _name_complaints(plan)
    yield from _reference_complaints(plan)
    yield from _formula_complaints(plan)
    yield from _alert_complaints(plan)


def _campaign_complaints(plan: Plan) -> typing.Iterator[str]:
    if not 0 < plan.campaign.alarm_budget < 1:
        yield f"campaign.alarm_budget is {plan.campaign.alarm_budget}; it is a probability between 0 and 1"
    if not 0.5 <= plan.campaign.confidence < 1:
        yield f"campaign.confidence is {plan.campaign.confidence}; it lies between 0.5 and 1"
    duration_s(plan.landing.settle, "landing.settle")
    if plan.order.patience != "auto":
        duration_s(plan.order.patience, "order.patience")
    if plan.silence is not None:
        duration_s(plan.silence.after, "silence.after")
    if plan.report is not None:
        duration_s(plan.report.every, "report.every")
    if plan.record.zone is not None:
        try:
            ZoneInfo(plan.record.zone)
        except (ZoneInfoNotFoundError, ValueError, OSError):
            yield f"record.zone: {plan.record.zone!r} is not a time zone; write one such as UTC"
    if plan.landing.format == "text":
        yield from _pattern_complaints(plan.landing.pattern)


def _pattern_complaints(pattern: str | None) -> typing.Iterator[str]:
    if pattern is None:
        yield 'landing.pattern is missing; format = "text" needs a regular expression with named groups'
        return
    try:
        groups = re.compile(pattern).groupindex
    except re.error as error:
        yield f"landing.pattern is not a regular expression: {error}"
        return
    if not groups:
        yield "landing.pattern has no named group; write (?P<name>…) for what a line states"


def _name_complaints(plan: Plan) -> typing.Iterator[str]:
    if not plan.responses:
        yield "responses: no response is named; add [responses.NAME] with at = …"
    seen: dict[str, str] = {}
    for section in ("responses", "factors", "nuisance"):
        for name in getattr(plan, section):
            if not _NAME.fullmatch(name):
                yield f"{section}.{name}: a name has letters, digits, _ . - and at most 64 of them"
            if name in seen:
                yield f"{section}.{name}: {seen[name]} has the same name; names are told apart everywhere"
            if name in RESERVED_ALONG or (section == "responses" and name in AUTO_RESPONSES):
                yield f"{section}.{name}: this name is the tool's own; choose another"
            seen[name] = section
    for name, response in plan.responses.items():
        if response.margin is not None and not 0 < response.margin < math.inf:
            yield f"responses.{name}.margin is {response.margin}; a margin is a number larger than 0"


def _reference_complaints(plan: Plan) -> typing.Iterator[str]:
    yield from _comparison_complaints(plan)
    yield from _time_complaints(plan)
    for name in plan.machines.exclusive:
        if name not in plan.nuisance:
            yield _unknown("machines.exclusive", name, plan.nuisance)
    for name in plan.schedule.levels if plan.schedule is not None else ():
        if name not in plan.factors:
            yield _unknown("schedule.levels", name, plan.factors)
    if plan.seeds.role == "block" and plan.record.seed is None:
        yield "seeds.role is 'block', but record.seed is not stated"


def _comparison_complaints(plan: Plan) -> typing.Iterator[str]:
    for number, comparison in enumerate(plan.comparisons):
        where = f"comparisons[{number}]"
        if comparison.response not in {*plan.responses, *AUTO_RESPONSES}:
            yield _unknown(f"{where}.response", comparison.response, plan.responses)
        for name in (name for group in comparison.between for name in group):
            if name not in plan.factors:
                yield _unknown(f"{where}.between", name, plan.factors)


def _time_complaints(plan: Plan) -> typing.Iterator[str]:
    for name, nuisance in plan.nuisance.items():
        if isinstance(nuisance, Derived) and getattr(plan.record, nuisance.source) is None:
            yield f"nuisance.{name}: record.{nuisance.source} is not stated, nothing can be derived from it"
    needed = {"sequence": plan.record.sequence, "started": plan.record.started}
    if plan.order.by in needed and needed[plan.order.by] is None:
        yield f"order.by is {plan.order.by!r}, but record.{plan.order.by} is not stated"


def _formula_complaints(plan: Plan) -> typing.Iterator[str]:
    if plan.baseline.kind != "formula":
        return
    if plan.baseline.formula is None:
        yield 'baseline.formula is missing; kind = "formula" needs one'
        return
    for term in parse_formula(plan.baseline.formula):
        for variable in term:
            if variable.name not in plan.factors:
                yield _unknown("baseline.formula", variable.name, plan.factors)


def _alert_complaints(plan: Plan) -> typing.Iterator[str]:
    for number, alert in enumerate(plan.alerts):
        where = f"alerts[{number}]"
        if alert.to == "command" and not alert.argv:
            yield f"{where}.argv is missing; name the program and its arguments"
        if alert.to == "url" and (alert.url_file is None) == (alert.url_env is None):
            yield f"{where}: an address needs url_file or url_env, one of them; it never stands in the plan"


def _unknown(where: str, name: str, known: typing.Iterable[str]) -> str:
    near = difflib.get_close_matches(name, list(known), n=1, cutoff=0.5)
    hint = f"did you mean {near[0]!r}?" if near else f"known: {', '.join(known) or 'none'}"
    return f"{where}: {name!r} is not known; {hint}"
