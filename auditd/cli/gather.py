"""`runaudit gather`."""

from __future__ import annotations

import time
from typing import TYPE_CHECKING

import click

from auditd.cli.options import plan_path
from auditd.cli.output import is_terminal, message

if TYPE_CHECKING:
    from collections.abc import Callable

    from auditd.landing import Progress

STEPS = {"read": "reading", "audit": "auditing"}


@click.command(epilog="Example: runaudit --plan study/plan.toml gather")
@click.pass_context
def gather(context: click.Context) -> None:
    """Take all that has landed, audit it, and end. For a backfill or a cron job."""
    from auditd.pipeline.gathering import gather as take_all

    began = time.monotonic()
    if is_terminal():
        from rich import progress as rich_progress
        from rich.console import Console

        with rich_progress.Progress(
            rich_progress.TextColumn("{task.description}"),
            rich_progress.BarColumn(),
            rich_progress.TextColumn(
                "{task.completed}/{task.total} files, {task.fields[runs]} runs, {task.fields[rate]}/s"
            ),
            rich_progress.TimeRemainingColumn(),
            console=Console(stderr=True),
            transient=True,
        ) as bar:
            task = bar.add_task("reading", total=None, runs=0, rate=0)

            def show(step: str, totals: Progress) -> None:
                rate = round(totals.n_records / max(time.monotonic() - began, 1e-3))
                bar.update(
                    task,
                    description=STEPS[step],
                    completed=totals.n_done,
                    total=totals.n_found,
                    runs=totals.n_records,
                    rate=rate,
                )

            done = take_all(plan_path(context), show)
    else:
        done = take_all(plan_path(context), _say_nothing())
    taken, seconds = done.taken, time.monotonic() - began
    message(
        f"gathered {taken.n_runs} runs from {done.n_files} files in {seconds:.1f} s; "
        f"{taken.n_refused} refused, {taken.n_seen_before} taken before; {taken.n_raised} new warnings"
    )
    for waiting in done.waiting:
        message(f"not taken: {waiting.path}: {waiting.why}")


def _say_nothing() -> Callable[[str, Progress], None]:
    return lambda _step, _totals: None
