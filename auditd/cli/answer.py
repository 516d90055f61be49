"""`runaudit answer`."""

from __future__ import annotations

import click

from auditd.cli.options import plan_path, scope_of
from auditd.cli.output import message
from auditd.store.answers import Action

EFFECTS: dict[Action, str] = {
    "noted": "the reason is kept",
    "set-aside": "the runs are left out of `evidence` and `compare`; the audit leaves out those to come",
    "restart": "a new epoch begins with the next run",
    "absorb": "a new epoch begins with the next run, the effect in its baseline",
}
"""What happens after an answer, by its action."""


@click.command(epilog='Example: runaudit answer W7 "fan replaced at 14:00" --restart host=n3')
@click.argument("warning", metavar="WARNING")
@click.argument("reason")
@click.option("--set-aside", "aside", multiple=True, metavar="NAME=LEVEL", help="Take these runs out.")
@click.option("--from", "since", metavar="RUN|TIME", help="Set aside from this run or time on.")
@click.option("--to", "until", metavar="RUN|TIME", help="Set aside up to this run or time.")
@click.option(
    "--restart",
    is_flag=False,
    flag_value="",
    metavar="[NAME=LEVEL]",
    help="Something was repaired: begin to audit afresh, all or one level.",
)
@click.option("--absorb", is_flag=True, help="Take the known effect into the baseline from here on.")
@click.pass_context
def answer(
    context: click.Context,
    warning: str,
    reason: str,
    aside: tuple[str, ...],
    since: str | None,
    until: str | None,
    restart: str | None,
    absorb: bool,
) -> None:
    """Reply to a warning. The reply is kept for ever and applies from the next run on."""
    from auditd.pipeline.replying import reply

    setting_aside = bool(aside or since or until)
    if setting_aside + (restart is not None) + absorb > 1:
        raise click.UsageError("one answer does one thing: --set-aside, --restart or --absorb", context)
    action: Action = "noted"
    scope = scope_of(context, aside)
    if setting_aside:
        action = "set-aside"
        scope |= {name: bound for name, bound in (("from", since), ("to", until)) if bound}
    elif restart is not None:
        action, scope = "restart", scope_of(context, (restart,) if restart else ())
    elif absorb:
        action = "absorb"
    reply(plan_path(context), warning, reason, action, scope)
    message(f"{warning}: answered ({action}); {EFFECTS[action]}")
