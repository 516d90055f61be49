"""The command `runaudit`: its commands, and how every end becomes an exit code."""

from __future__ import annotations

import errno
import os
import sys
import traceback

import click

from auditd import __version__
from auditd.cli import (
    amend,
    answer,
    audit,
    compare,
    demo,
    draft,
    evidence,
    explain,
    export,
    gather,
    rehearse,
    report,
    runs,
    schedule,
    service,
    show,
    status,
    store,
    warnings,
    watch,
)
from auditd.cli.output import message
from auditd.errors import AuditdError

EXIT_USAGE = 64
EXIT_UNAVAILABLE = 69
EXIT_INTERNAL = 70
EXIT_CANNOT_CREATE = 73
EXIT_INTERRUPTED = 130
CANNOT_WRITE = (errno.ENOSPC, errno.EDQUOT, errno.EROFS, errno.EFBIG)
"""What the system says when output has no room."""


@click.group(
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog="Exit codes: 0 done, 1 standing warnings, 64 usage, 65 bad data, 69 service unavailable, "
    "70 internal, 73 cannot create, 75 held by another, 78 bad plan or store.",
)
@click.option(
    "--plan", metavar="PATH", envvar="RUNAUDIT_PLAN", help="The plan; else plan.toml here or above."
)
@click.version_option(__version__, prog_name="runaudit")
@click.pass_context
def main(context: click.Context, plan: str | None) -> None:
    """Watch a long campaign of runs for broken independence while it is being made.

    \b
    First steps:
      runaudit demo                 see it work on a made-up campaign
      runaudit draft results/       write a first plan from what has landed
      runaudit watch                index and audit runs as they land
      runaudit warnings             what is wrong, since when, and what to do

    No warning is not proof of independence: `runaudit status` says what could have been seen by now.
    """  # noqa: D301 - click reads a real backspace
    context.obj = plan


COMMANDS = (
    draft.draft,
    schedule.schedule,
    rehearse.rehearse,
    watch.watch,
    gather.gather,
    status.status,
    runs.runs,
    warnings.warnings,
    show.show,
    answer.answer,
    amend.amend,
    audit.audit,
    evidence.evidence,
    compare.compare,
    explain.explain,
    report.report,
    export.export,
    service.service,
    store.store,
    demo.demo,
)
for command in COMMANDS:
    main.add_command(command)


def run(arguments: list[str] | None = None) -> None:
    """Run the command and end the process with its exit code."""
    code = run_code(sys.argv[1:] if arguments is None else arguments)
    try:
        sys.stdout.flush()
    except OSError as error:
        code = code if code == EXIT_CANNOT_CREATE else _code_of(error)  # said already
        _close_quietly()
    sys.exit(code)


def run_code(arguments: list[str]) -> int:
    """Run the command and return its exit code; every end has one that is stated."""
    try:
        result = main.main(args=arguments, prog_name="runaudit", standalone_mode=False)
    except BaseException as error:  # noqa: BLE001 - the last resort of a command: one line and a stated code
        return _code_of(error)
    return result if isinstance(result, int) else 0


def _code_of(error: BaseException) -> int:
    """Say what ended the command, and return the exit code for it."""
    match error:
        case click.exceptions.Exit():
            return error.exit_code
        case click.ClickException():
            error.show()
            return EXIT_USAGE
        case click.Abort() | KeyboardInterrupt():
            return EXIT_INTERRUPTED
        case BrokenPipeError() | SystemExit():  # click makes SystemExit of a closed pipe, and of nothing else
            _close_quietly()
            return 0
        case AuditdError():
            message(f"runaudit: {error}")
            return error.exit_code
        case _:
            return _unexpected(error)


def _unexpected(error: BaseException) -> int:
    if os.environ.get("RUNAUDIT_TRACE"):
        traceback.print_exception(error)
    if type(error).__module__.startswith("sqlalchemy"):
        reason = str(getattr(error, "orig", error)).splitlines()[0]
        message(f"runaudit: the store does not answer: {reason}")
        return EXIT_UNAVAILABLE
    if isinstance(error, OSError) and error.errno in CANNOT_WRITE:
        message(f"runaudit: cannot write: {error.strerror}")
        return EXIT_CANNOT_CREATE
    message(f"runaudit: unexpected {type(error).__name__}: {error}; set RUNAUDIT_TRACE=1 for the details")
    return EXIT_INTERNAL


def _close_quietly() -> None:
    """Point stdout nowhere, so that the interpreter's last flush does not complain about a closed pipe."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
