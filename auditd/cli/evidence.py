"""`runaudit evidence`."""

from __future__ import annotations

from typing import Any

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import message, percent, print_json, print_table, safe, worth
from auditd.records import cell_label


@click.command(epilog="Example: runaudit evidence --json")
@json_option
@click.pass_context
def evidence(context: click.Context, as_json: bool) -> None:
    """Say how many independent runs the campaign is worth. By response and cell, and what was not checked."""
    from auditd.pipeline.campaign import open_for_queries
    from auditd.pipeline.stored_evidence import evidence_document

    document = evidence_document(open_for_queries(plan_path(context)))
    if as_json:
        print_json(document)
        return
    _print(document)


def _print(document: dict[str, Any]) -> None:  # the JSON document
    if not document["responses"]:
        message("nothing has been weighed yet: too few completed runs, or the daemon has not run")
    rows = []
    for name, one in document["responses"].items():
        causes = ", ".join(
            f"{cause} x{factor:.2f}" for cause, factor in one["parts"].items() if factor < 0.995
        )
        interval = f"{percent(one['loss_low'])} to {percent(one['loss_high'])}"
        rows.append(
            (
                name,
                one["n"],
                worth(one["n_effective"]),
                percent(one["loss"]),
                interval,
                causes or "none found",
            )
        )
    print_table(["response", "runs", "worth", "lost", "interval", "by"], rows, right=[1, 2, 3])
    for name, one in document["responses"].items():
        click.echo("")
        cells = [(cell_label(cell["cell"]), cell["n"], worth(cell["n_effective"])) for cell in one["cells"]]
        print_table([name, "runs", "worth"], cells, right=[1, 2])
        for remark in one["remarks"]:
            click.echo(f"  {safe(remark)}")
    click.echo("\nnot checked:")
    for sentence in document["not_checked"]:
        click.echo(f"  {safe(sentence)}")
