"""`runaudit service`."""

from __future__ import annotations

import os
import shutil
import sys
from pathlib import Path

import click

from auditd.cli.options import plan_path


@click.command(epilog="Example: runaudit service > ~/.config/systemd/user/runaudit.service")
@click.pass_context
def service(context: click.Context) -> None:
    """Print a hardened systemd user unit that keeps the daemon of this plan running."""
    from auditd.plan_reading import load_plan
    from auditd.service import unit_text

    path = Path(os.path.abspath(plan_path(context)))
    load_plan(path)
    program = shutil.which("runaudit") or os.path.abspath(sys.argv[0])
    click.echo(unit_text(path, Path(program)), nl=False)
