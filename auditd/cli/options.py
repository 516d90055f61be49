"""Options and arguments that several commands take, and the plan that they are about."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

import click

from auditd.records import GRADES

Command = TypeVar("Command", bound=Callable[..., Any])

json_option = click.option("--json", "as_json", is_flag=True, help="Print one JSON document.")
at_least_option = click.option(
    "--at-least", type=click.Choice(GRADES), help="Warnings of this grade and above; exit 1 is for material."
)
response_option = click.option("--response", metavar="NAME", help="Of this response only.")


class Instant(click.ParamType[datetime]):
    """A time: RFC 3339, or a date; without an offset it is taken for UTC."""

    name = "time"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> datetime:
        """Return the time."""
        if isinstance(value, datetime):
            return value
        try:
            at = datetime.fromisoformat(value)
        except ValueError:
            self.fail(f"{value!r} is not a time; write one such as 2027-03-01T12:00:00Z", param, ctx)
        return at if at.tzinfo is not None else at.replace(tzinfo=UTC)


since_option = click.option("--since", type=Instant(), help="From this time on (RFC 3339).")


def plan_path(context: click.Context) -> Path:
    """Return the path of the plan that a command is to use."""
    from auditd.pipeline.campaign import find_plan

    return find_plan(context.find_root().obj)


def scope_of(context: click.Context, texts: tuple[str, ...]) -> dict[str, str]:
    """Return levels written as `name=level`."""
    scope = {}
    for text in texts:
        name, sign, level = text.partition("=")
        if not sign or not name or not level:
            raise click.UsageError(f"{text!r}: write name=level, for example host=n3", context)
        scope[name] = level
    return scope
