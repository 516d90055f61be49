"""`runaudit explain`."""

from __future__ import annotations

import textwrap

import click
import msgspec

from auditd.cli.options import json_option
from auditd.cli.output import print_json, print_table

WIDTH = 88
"""Columns of text on a terminal."""
PARTS = (
    ("asks", "What it asks"),
    ("rests_on", "What it rests on"),
    ("blind_to", "What it cannot see"),
    ("do", "What to do"),
    ("source", "Source"),
)


@click.command(epilog="Example: runaudit explain drift")
@click.argument("kind", required=False)
@json_option
def explain(kind: str | None, as_json: bool) -> None:
    """Explain a kind of warning or a check. What it asks, rests on and cannot see, and what to do."""
    from auditd.verdicts.explanations import CHECKS, KINDS
    from auditd.verdicts.explanations import explain as explanation_of

    if kind is None:
        found = [explanation_of(name) for name in (*KINDS, *CHECKS)]
        if as_json:
            print_json({"schema": 1, "kinds": [msgspec.to_builtins(one) for one in found]})
        else:
            print_table(["kind", "what it is"], [(one.kind, one.title) for one in found])
        return
    one = explanation_of(kind)
    if as_json:
        print_json({"schema": 1, **msgspec.to_builtins(one)})
        return
    click.echo(f"{one.kind}: {one.title}\n")
    for field, title in PARTS:
        click.echo(title)
        text = str(getattr(one, field))
        click.echo(textwrap.fill(text, WIDTH, initial_indent="  ", subsequent_indent="  ") + "\n")
