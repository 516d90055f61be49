"""`runaudit runs`."""

from __future__ import annotations

from datetime import datetime
from typing import Any

import click

from auditd.cli.options import json_option, plan_path, since_option
from auditd.cli.output import message, number, print_json, print_table
from auditd.records import level_label

N_ROWS = 50
"""Rows shown on a terminal unless --limit says otherwise; JSON holds all."""


@click.command(epilog="Example: runaudit runs --where host=n3 --where status=ok --limit 20")
@click.option(
    "--where", multiple=True, metavar="NAME=VALUE", help="Factor, nuisance, status, seed, id, metadata."
)
@since_option
@click.option(
    "--order", type=click.Choice(["position", "arrival", "started"]), default="position", show_default=True
)
@click.option("--refused", is_flag=True, help="Show the records that were not taken, and why.")
@click.option("--limit", type=click.IntRange(min=1), metavar="N", help="At most so many.")
@json_option
@click.pass_context
def runs(
    context: click.Context,
    where: tuple[str, ...],
    since: datetime | None,
    order: str,
    refused: bool,
    limit: int | None,
    as_json: bool,
) -> None:
    """List runs with order and circumstances, or what was refused."""
    from auditd.pipeline.asking import refused_document, runs_document
    from auditd.pipeline.campaign import open_for_queries

    campaign = open_for_queries(plan_path(context))
    most = limit if as_json or limit is not None else N_ROWS
    if refused:
        document = refused_document(campaign, most)
    else:
        document = runs_document(campaign, where=where, since=since, order=order, limit=most)
    if as_json:
        document.pop("total")
        print_json(document)
        return
    (_print_refused if refused else _print_runs)(document)


def _print_runs(document: dict[str, Any]) -> None:  # the JSON document
    found = document["runs"]
    if not found:
        message("no run matches")
        return
    responses = list(dict.fromkeys(name for run in found for name in run["responses"]))
    cell, nuisance = list(found[0]["cell"]), list(found[0]["nuisance"])
    headers = ["position", "id", "started", "status", *cell, *nuisance, *responses]
    rows = [
        [
            "late" if run["late"] else run["position"],
            run["id"],
            run["started"],
            run["status"],
            *(level_label(run["cell"].get(name)) for name in cell),
            *(level_label(run["nuisance"].get(name)) for name in nuisance),
            *(number(run["responses"].get(name), 6) for name in responses),
        ]
        for run in found
    ]
    print_table(headers, rows, right=[0, *range(len(headers) - len(responses), len(headers))])
    if len(found) < document["total"]:
        message(f"{len(found)} of {document['total']} runs; --limit N shows more, --json all")


def _print_refused(document: dict[str, Any]) -> None:  # the JSON document
    if not document["refused"]:
        message("nothing has been refused")
        return
    rows = [(one["path"], one["offset"], one["kind"], one["reason"]) for one in document["refused"]]
    print_table(["path", "offset", "kind", "reason"], rows, right=[1])
    if len(rows) < document["total"]:
        message(f"{len(rows)} of {document['total']} refusals; --limit N shows more")
