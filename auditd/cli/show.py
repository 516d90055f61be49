"""`runaudit show`."""

from __future__ import annotations

import textwrap
from typing import Any

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import print_json, safe
from auditd.cli.warnings import WIDTH, print_warnings


@click.command(epilog="Example: runaudit show W7, or: runaudit show run:k0412")
@click.argument("what", metavar="W7|run:ID")
@json_option
@click.pass_context
def show(context: click.Context, what: str, as_json: bool) -> None:
    """Show one warning or one run in full."""
    from auditd.pipeline.campaign import open_for_queries
    from auditd.pipeline.showing import run_shown, warning_shown

    campaign = open_for_queries(plan_path(context))
    if what.startswith("run:"):
        document = run_shown(campaign, what[4:])
        if as_json:
            print_json(document)
        else:
            _print_run(document)
        return
    document = warning_shown(campaign, what)
    if as_json:
        print_json(document)
        return
    print_warnings([document["warning"]])
    _print_warning(document)


def _print_warning(document: dict[str, Any]) -> None:  # the JSON document
    one = document["warning"]
    facts = [
        ("raised", f"{one['raised_at']} at run {one['run']} (position {one['index']}, {one['n']} runs seen)"),
        ("since", _span(one)),
        ("evidence", _evidence(one)),
        ("effect", _effect(one["effect"])),
    ]
    for name, text in facts:
        if text:
            click.echo(f"    {name:9} {safe(text)}")
    for answer in document["answers"]:
        click.echo(safe(f"    answered  {answer['at']} ({answer['action']}): {answer['reason']}"))
    for line in [*document["chart"], *document["evidence_chart"]]:
        click.echo(line)
    click.echo("")
    text = f"What it asks: {document['explanation']} See `runaudit explain {one['kind']}`."
    click.echo(textwrap.fill(text, WIDTH, initial_indent="    ", subsequent_indent="    "))


def _span(one: dict[str, Any]) -> str:  # a warning's document
    if one["since"] is None:
        return ""
    return f"position {one['since']}; not excluded: {one['since_low']} to {one['since_high']}"


def _evidence(one: dict[str, Any]) -> str:  # a warning's document
    if one["log_e"] is None:
        return ""
    return f"log e {one['log_e']:.2f}, threshold {one['threshold']:.2f}"


def _effect(effect: dict[str, Any] | None) -> str:
    if effect is None:
        return ""
    interval = "" if effect["low"] is None else f" ({effect['low']:.3g} to {effect['high']:.3g})"
    return f"{effect['name']} {effect['value']:.3g}{interval}"


def _print_run(document: dict[str, Any]) -> None:  # the JSON document
    run = document["run"]
    for name, value in run.items():
        if isinstance(value, dict):
            for inner, level in value.items():
                click.echo(safe(f"  {name}.{inner:20} {level}"))
        else:
            click.echo(safe(f"  {name:14} {'-' if value is None else value}"))
    for warning in document["warnings"]:
        click.echo(safe(f"  see {warning['id']}: {warning['message']}"))
