"""`runaudit amend`."""

from __future__ import annotations

import click

from auditd.cli.options import plan_path
from auditd.cli.output import message


@click.command(epilog='Example: runaudit amend "the margin was in the wrong unit"')
@click.argument("reason")
@click.pass_context
def amend(context: click.Context, reason: str) -> None:
    """Take a changed plan into use, as a new version and a new epoch."""
    from auditd.pipeline.replying import amend as take_into_use

    for change in take_into_use(plan_path(context), reason):
        message(f"changed  {change}")
