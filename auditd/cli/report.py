"""`runaudit report`."""

from __future__ import annotations

from pathlib import Path

import click

from auditd.cli.options import plan_path
from auditd.cli.output import message


@click.command(epilog="Example: runaudit report -o report.html")
@click.option(
    "-o",
    "--output",
    "output",
    type=click.Path(path_type=Path),
    default=Path("report.html"),
    show_default=True,
    help="Where the page is written; an older one is replaced at once.",
)
@click.pass_context
def report(context: click.Context, output: Path) -> None:
    """Write one self-contained page. What the runs are worth, with every picture and its numbers."""
    from auditd.pipeline.campaign import open_for_queries
    from auditd.pipeline.reporting import clock_now, write_report

    written = write_report(open_for_queries(plan_path(context)), output, clock_now())
    message(f"wrote {written.path} ({written.n_bytes / 1e6:.2f} MB) in {written.took_s:.1f} s")
