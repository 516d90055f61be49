"""`runaudit demo`."""

from __future__ import annotations

import tempfile
import textwrap
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from auditd.cli.output import print_table, safe
from auditd.cli.warnings import WIDTH, heading

if TYPE_CHECKING:
    from auditd.pipeline.demonstration import Shown

EDITIONS = {
    "faulty": "a made-up campaign of mooring simulations on five hosts, with six faults planted",
    "clean": "its twin, in which nothing is wrong",
}


@click.command(epilog="Example: runaudit demo --keep /tmp/demo")
@click.option("--edition", type=click.Choice(["faulty", "clean", "both"]), default="both", show_default=True)
@click.option("--keep", metavar="FOLDER", help="Work in this new folder and leave it, to look around in.")
def demo(edition: str, keep: str | None) -> int:
    """Play a made-up campaign through the daemon. Warnings as they are raised, then planted against found."""
    from auditd.errors import CannotCreate

    chosen = ("faulty", "clean") if edition == "both" else (edition,)
    if keep is None:
        with tempfile.TemporaryDirectory(prefix="runaudit-demo-") as folder:
            return max(_show(one, Path(folder) / one) for one in chosen)
    if Path(keep).exists():
        raise CannotCreate(f"{keep} is there already; name a new folder")
    return max(_show(one, Path(keep) / one) for one in chosen)


def _show(edition: str, folder: Path) -> int:
    from auditd.pipeline.demonstration import show_edition

    folder.mkdir(parents=True)
    began = time.monotonic()
    click.echo(f"{edition}: {EDITIONS[edition]}\n")
    shown = show_edition(edition, folder, lambda text: click.echo(f"  {text}"), _tell)
    _print(shown)
    click.echo(f"  ({time.monotonic() - began:.0f} s)\n")
    missed = any(one.found is None for one in shown.planted)
    return int(missed or bool(shown.unexplained))


def _tell(one: dict[str, Any]) -> None:  # a warning's document
    click.echo(f"  {heading(one)}")
    for text in (one["message"], one["remedy"]):
        click.echo(textwrap.fill(safe(text), WIDTH, initial_indent="      ", subsequent_indent="      "))


def _print(shown: Shown) -> None:
    if shown.planted:
        click.echo("\n  planted against found")
        rows = [(f"    {one.name}", one.run, one.found or "NOT FOUND", one.what) for one in shown.planted]
        print_table(["    fault", "from run", "found", "what was planted"], rows)
    if shown.unexplained:
        click.echo(f"  raised, but not planted: {', '.join(shown.unexplained)}")
    elif not shown.planted:
        click.echo("  no warning was raised, and none should be")
