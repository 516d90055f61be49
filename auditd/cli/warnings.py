"""`runaudit warnings`."""

from __future__ import annotations

import textwrap
from datetime import datetime
from typing import Any

import click

from auditd.cli.options import at_least_option, json_option, plan_path, response_option, since_option
from auditd.cli.output import percent, print_json, safe
from auditd.records import Grade

WIDTH = 88
"""Columns of text on a terminal."""


@click.command(epilog="Example: runaudit warnings --state standing --at-least material")
@click.option("--kind", metavar="KIND", help="Of this kind only; `runaudit explain` lists them.")
@response_option
@click.option("--state", type=click.Choice(["standing", "answered", "withdrawn"]), help="In this state only.")
@at_least_option
@since_option
@json_option
@click.pass_context
def warnings(
    context: click.Context,
    kind: str | None,
    response: str | None,
    state: str | None,
    at_least: Grade | None,
    since: datetime | None,
    as_json: bool,
) -> int:
    """List warnings. What is wrong, since when, by how much, what to do; exit 1 if one stands."""
    from auditd.pipeline.asking import standing_at_least, warnings_document
    from auditd.pipeline.campaign import open_for_queries

    campaign = open_for_queries(plan_path(context))
    document = warnings_document(
        campaign, kind=kind, response=response, state=state, at_least=at_least, since=since
    )
    if as_json:
        print_json(document)
    else:
        print_warnings(document["warnings"])
    return int(standing_at_least(campaign, at_least or "material"))


def print_warnings(found: list[dict[str, Any]]) -> None:  # documents of warnings
    """Print warnings, each a heading, a sentence, the remedy and what it explains."""
    if not found:
        click.echo("no warnings (which is not proof of independence: `runaudit status` says what would show)")
        return
    for one in found:
        click.echo(heading(one))
        for text in (one["message"], one["remedy"]):
            _print_indented(text)
        if one["with"]:
            _print_indented(f"explains also: {', '.join(_listed(listed) for listed in one['with'])}")
        if one["answer"]:
            _print_indented(f"answered: {one['answer']}")
        click.echo("")


def _print_indented(text: str) -> None:
    click.echo(textwrap.fill(safe(text), WIDTH, initial_indent="    ", subsequent_indent="    "))


def heading(one: dict[str, Any]) -> str:  # a warning's document
    """Return one line that tells warnings apart."""
    where = f" {one['along']}" if one["along"] else ""
    level = f" {one['level']}" if one["level"] else ""
    of = f" in {one['response']}" if one["response"] else ""
    loss = (
        f", {percent(one['evidence_loss'])} of the evidence lost" if one["evidence_loss"] is not None else ""
    )
    return safe(
        f"{one['id']}  {one['grade'].upper()}  {one['kind']}{where}{level}{of}  ({one['state']}{loss})"
    )


def _listed(listed: dict[str, Any]) -> str:  # part of a warning's document
    parts = [listed["kind"], listed["along"], listed["level"]]
    return safe(" ".join(part for part in parts if part))
