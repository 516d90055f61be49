"""`runaudit show`."""

from __future__ import annotations

import textwrap
from typing import Any

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import print_json, safe
from auditd.cli.warnings import WIDTH, print_warnings
from auditd.series.terminal_evidence import LN_10


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
        ("raised", f"{one['raised_at'][:19]}Z{_at(one)}"),
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


def _at(one: dict[str, Any]) -> str:  # a warning's document
    if one["run"] is None:
        return ""
    where = "" if one["index"] is None else f" (position {one['index']}, {one['n']:,} runs seen)"
    return f" at run {one['run']}{where}"


def _span(one: dict[str, Any]) -> str:  # a warning's document
    if one["since"] is None:
        return ""
    low, high = one["since_low"], one["since_high"]
    span = "" if low is None or high is None else f"; it may have begun anywhere from {low} to {high}"
    return f"position {one['since']}{span}"


def _evidence(one: dict[str, Any]) -> str:  # a warning's document
    """Return evidence and threshold as powers of ten, as in the chart."""
    if one["log_e"] is None or one["threshold"] is None:
        return ""
    return f"10^{one['log_e'] / LN_10:.1f} when raised; the threshold was 10^{one['threshold'] / LN_10:.1f}"


def _effect(effect: dict[str, Any] | None) -> str:
    if effect is None:
        return ""
    interval = "" if effect["low"] is None else f" ({effect['low']:.3g} to {effect['high']:.3g})"
    return f"{effect['name']} {effect['value']:.3g}{interval}"


def _told(value: Any) -> str:  # a JSON value
    if value is None:
        return "-"
    return safe(str(value).lower() if isinstance(value, bool) else value)


def _print_run(document: dict[str, Any]) -> None:  # the JSON document
    run = document["run"]
    facts: list[tuple[str, Any]] = []
    for name, value in run.items():
        if isinstance(value, dict):
            facts += [(f"{name}.{inner}", level) for inner, level in value.items()]
        else:
            facts.append((name, value))
    width = max(len(safe(name)) for name, _ in facts)
    for name, value in facts:
        click.echo(f"  {safe(name):{width}}  {_told(value)}")
    for warning in document["warnings"]:
        click.echo(safe(f"  see {warning['id']}: {warning['message']}"))
