"""`runaudit export`."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Literal

import click

from auditd.cli.options import plan_path
from auditd.cli.output import message


@click.command(epilog="Example: runaudit export series --format parquet -o series.parquet")
@click.argument("what", type=click.Choice(["runs", "series", "warnings"]))
@click.option(
    "--format", "form", type=click.Choice(["csv", "json", "parquet"]), default="csv", show_default=True
)
@click.option(
    "-o", "--output", "output", type=click.Path(path_type=Path), help="Write there; else to stdout."
)
@click.pass_context
def export(
    context: click.Context,
    what: Literal["runs", "series", "warnings"],
    form: Literal["csv", "json", "parquet"],
    output: Path | None,
) -> None:
    """Write runs, series or warnings for other programs.

    Series are responses in order, on the audited scale. Numbers read back exactly. In CSV (RFC 4180) a text
    that a spreadsheet would take for a formula gets an apostrophe in front; JSON and Parquet hold every text
    as it is.
    """
    from auditd.pipeline.campaign import open_for_queries
    from auditd.pipeline.exporting import export as write

    n = write(open_for_queries(plan_path(context)), what, form, output, sys.stdout.buffer)
    if output is not None:
        message(f"wrote {n:,} rows to {output}")
