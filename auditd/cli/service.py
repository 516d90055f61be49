"""`runaudit service`."""

from __future__ import annotations

import os
import shutil
import sys
from pathlib import Path

import click

from auditd.cli.options import plan_path
from auditd.errors import BadInput


@click.command(epilog="Example: runaudit service > ~/.config/systemd/user/runaudit.service")
@click.pass_context
def service(context: click.Context) -> None:
    """Print a hardened systemd user unit for this plan's daemon."""
    from auditd.plan_reading import load_plan
    from auditd.service import unit_text

    path = Path(os.path.abspath(plan_path(context)))
    load_plan(path)
    click.echo(unit_text(path, _program()), nl=False)


def _program() -> Path:
    """Return the installed command: this one, the one beside its Python, or one on the path."""
    running, beside = Path(os.path.abspath(sys.argv[0])), Path(sys.executable).with_name("runaudit")
    for candidate in (running if running.name == "runaudit" else beside, beside):
        if os.access(candidate, os.X_OK):
            return candidate
    found = shutil.which("runaudit")
    if found is None:
        raise BadInput("the command `runaudit` is not installed; install the package first")
    return Path(found)
