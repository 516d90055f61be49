"""`runaudit store`: upgrade, verify and backup."""

from __future__ import annotations

import click

from auditd.cli.options import plan_path
from auditd.cli.output import message


@click.group()
def store() -> None:
    """Care for the store: upgrade its schema, verify it, back it up."""


@store.command(epilog="Example: runaudit store upgrade")
@click.pass_context
def upgrade(context: click.Context) -> None:
    """Bring the store to this release's schema. The old file stays beside it."""
    from auditd.plan_reading import load_plan
    from auditd.store.migrate import upgrade_store
    from auditd.store.place import store_url

    backup = upgrade_store(store_url(load_plan(plan_path(context))))
    message(
        "the store is of this release's schema" + (f"; the old one is kept as {backup}" if backup else "")
    )


@store.command(epilog="Example: runaudit store verify")
@click.pass_context
def verify(context: click.Context) -> int:
    """Check the store, and audit all runs anew. Pages, counts, places, and every alarm at its run."""
    from auditd.pipeline.verifying import verify as complaints_of

    complaints = complaints_of(plan_path(context))
    for complaint in complaints:
        message(f"wrong: {complaint}")
    if not complaints:
        message("the store checks: pages, counts, places, and every alarm at its run")
    return 78 if complaints else 0


@store.command(epilog="Example: runaudit store backup /backup/study.sqlite")
@click.argument("path", type=click.Path(dir_okay=False))
@click.pass_context
def backup(context: click.Context, path: str) -> None:
    """Copy the store while the daemon runs, and check the copy."""
    from pathlib import Path

    from auditd.plan_reading import load_plan
    from auditd.store.backup import backup_store
    from auditd.store.place import store_url

    backup_store(store_url(load_plan(plan_path(context))), Path(path))
    message(f"backed up to {path}, and checked")
