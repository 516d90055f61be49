"""`runaudit watch`."""

from __future__ import annotations

import logging
import sys

import click

from auditd.cli.options import plan_path
from auditd.cli.output import safe

REPEAT_S = 600.0
"""A log line that was just printed is counted, not printed again, for so long."""


class _Lines(logging.Formatter):
    """One line a record, without terminal escapes."""

    def format(self, record: logging.LogRecord) -> str:
        """Return time, level and message on one line."""
        at = self.formatTime(record, "%Y-%m-%dT%H:%M:%S%z")
        return f"{at} {record.levelname.lower():7} {safe(record.getMessage())}"


class FoldRepeats(logging.Filter):
    """Lets a repeated message through once in a while, with how often it was held back."""

    def __init__(self) -> None:
        super().__init__()
        self._seen: dict[str, tuple[float, int]] = {}

    def filter(self, record: logging.LogRecord) -> bool:
        """Whether the record is printed."""
        if len(self._seen) > 1000:
            self._seen.clear()
        at, n_held = self._seen.get(str(record.msg), (-REPEAT_S, 0))
        if record.levelno >= logging.WARNING and record.created - at < REPEAT_S:
            self._seen[str(record.msg)] = (at, n_held + 1)
            return False
        self._seen[str(record.msg)] = (record.created, 0)
        if n_held:
            record.msg = f"{record.msg} (and {n_held} more like it)"
        return True


@click.command(epilog="Example: runaudit --plan study/plan.toml watch")
@click.option(
    "--collect-only", is_flag=True, help="Take runs for an auditor elsewhere; needs a PostgreSQL store."
)
@click.pass_context
def watch(context: click.Context, collect_only: bool) -> int:
    """Run the daemon. It takes runs as they land, audits, warns; SIGTERM ends it, SIGHUP reloads the plan."""
    _set_up_log()
    path = plan_path(context)
    if collect_only:
        from auditd.collector import Collector

        return Collector(path).run()
    from auditd.daemon import Daemon

    return Daemon(path).run()


def _set_up_log() -> None:
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(_Lines())
    handler.addFilter(FoldRepeats())
    log = logging.getLogger("auditd")
    log.handlers[:] = [handler]
    log.setLevel(logging.INFO)
    log.propagate = False
