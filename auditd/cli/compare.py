"""`runaudit compare`."""

from __future__ import annotations

import textwrap
from typing import Any

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import message, number, print_json, print_table, safe, worth

WIDTH = 88
"""Columns of text on a terminal."""


@click.command(epilog="Example: runaudit compare solver=implicit solver=explicit")
@click.argument("a", required=False)
@click.argument("b", required=False)
@json_option
@click.pass_context
def compare(context: click.Context, a: str | None, b: str | None, as_json: bool) -> None:
    """Compare cells, B less A, honest interval beside naive. Without arguments: the planned ones."""
    from auditd.pipeline.looking import compare as look

    if (a is None) != (b is None):
        raise click.UsageError(
            "a comparison has two sides: write both, or none for the planned ones", context
        )
    document = look(plan_path(context), a, b)
    if as_json:
        print_json(document)
        return
    if not document["comparisons"]:
        message("the plan has no comparisons; name two cells, for example: solver=implicit solver=explicit")
        return
    _print(document["comparisons"])
    if "with_set_aside" in document:
        click.echo(f"with the {document['set_aside']} runs that were set aside:")
        _print(document["with_set_aside"])
    click.echo(
        f"This is look {document['look']}. Whoever looks repeatedly and may stop early goes by the interval "
        "'at any look'."
    )


def _print(found: list[dict[str, Any]]) -> None:  # comparisons' documents
    for one in found:
        scale = "" if one.get("scale", "linear") == "linear" else f" ({one['scale']} scale)"
        unit = f" ({one['unit']})" if one.get("unit") and not scale else ""
        kind = "planned" if one["planned"] else "unplanned"
        click.echo(safe(f"{one['response']}{unit}{scale}: {one['b']} less {one['a']}  [{kind}]"))
        if one["estimable"]:
            _print_intervals(one)
        click.echo(textwrap.fill(safe(one["sentence"]), WIDTH, initial_indent="  ", subsequent_indent="  "))
        for remark in one["remarks"]:
            click.echo(textwrap.fill(safe(remark), WIDTH, initial_indent="  - ", subsequent_indent="    "))
        click.echo("")


def _print_intervals(one: dict[str, Any]) -> None:  # a comparison's document
    def interval(low: str, high: str) -> str:
        return f"{number(one[low], 4)} to {number(one[high], 4)}"

    rows = [
        ("  honest", number(one["estimate"], 4), interval("low", "high"), worth(one["n_effective"])),
        ("  at any look", "", interval("low_any", "high_any"), ""),
        ("  naive", "", interval("naive_low", "naive_high"), str(one["n"])),
        ("  Hedges' g", number(one["hedges_g"]), interval("g_low", "g_high"), ""),
    ]
    headers = ("", "estimate", f"{100 * one['confidence']:.4g} % interval", "worth (runs)")
    print_table(headers, rows, right=[1, 3])
