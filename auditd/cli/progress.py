"""A progress bar on a terminal; nothing elsewhere."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager

from auditd.cli.output import is_terminal


@contextmanager
def counting(title: str) -> Iterator[Callable[[int, int], None]]:
    """Give a function to be called with what is done and what there is in all."""
    if not is_terminal():
        yield lambda _done, _total: None
        return
    from rich.console import Console
    from rich.progress import Progress

    with Progress(console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(title, total=None)
        yield lambda done, total: bar.update(task, completed=done, total=total)
