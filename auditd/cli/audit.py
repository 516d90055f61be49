"""`runaudit audit`."""

from __future__ import annotations

import textwrap
from typing import Any

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import number, print_json, print_table, safe

WIDTH = 88
"""Columns of text on a terminal."""


@click.command(epilog="Example: runaudit audit --json")
@json_option
@click.pass_context
def audit(context: click.Context, as_json: bool) -> None:
    """Look once with the classical checks, over every order. P-values are adjusted across what was asked."""
    from auditd.pipeline.full_audit import audit as look

    document = look(plan_path(context))
    if as_json:
        print_json(document)
        return
    _print("dependence and design", document["findings"])
    click.echo("")
    _print("shape and spread (a family of their own)", document["shape"])
    click.echo("\nnot checked:")
    for sentence in document["not_checked"]:
        click.echo(f"  {safe(sentence)}")
    click.echo("\n'no evidence' is not proof of independence; `runaudit status` says what would have shown.")


def _print(title: str, findings: list[dict[str, Any]]) -> None:  # findings' documents
    click.echo(title)
    remarks: dict[str, int] = {}
    rows = []
    for one in findings:
        remark = remarks.setdefault(one["reason"], len(remarks) + 1) if one["reason"] else None
        rows.append(
            (
                f"  {one['response'] or '(design)'}",
                one["along"],
                one["check"],
                one["verdict"],
                _effect(one["effect"]),
                number(one["adjusted_pvalue"]),
                one["n"],
                "" if remark is None else f"({remark})",
            )
        )
    headers = ["  response", "along", "check", "verdict", "effect", "adjusted p", "runs", ""]
    print_table(headers, rows, right=[5, 6])
    for text, remark in remarks.items():
        indent = f"  ({remark}) "
        click.echo(
            textwrap.fill(safe(text), WIDTH, initial_indent=indent, subsequent_indent=" " * len(indent))
        )


def _effect(effect: dict[str, Any] | None) -> str:
    if effect is None:
        return ""
    if effect["low"] is None:
        return f"{effect['name']} {effect['value']:.3g}"
    return f"{effect['name']} {effect['value']:.3g} ({effect['low']:.3g} to {effect['high']:.3g})"
