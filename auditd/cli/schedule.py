"""`runaudit schedule`."""

from __future__ import annotations

import click

from auditd.cli.options import plan_path
from auditd.cli.output import message, print_json


@click.command(epilog="Example: runaudit schedule --replicates 20 --hosts n1,n2,n3 --seed 7 --format csv")
@click.option("--replicates", type=click.IntRange(min=1), metavar="N", help="Blocks a host; else the plan's.")
@click.option("--hosts", metavar="A,B", help="Hosts, separated by commas; else the plan's.")
@click.option(
    "--seed", type=click.IntRange(min=0), metavar="S", help="Entropy; the same seed, the same schedule."
)
@click.option("--format", "form", type=click.Choice(["csv", "json"]), default="csv", show_default=True)
@click.option(
    "--rest", "only_rest", is_flag=True, help="Only what has not landed; needs the schedule's --seed."
)
@click.pass_context
def schedule(
    context: click.Context,
    replicates: int | None,
    hosts: str | None,
    seed: int | None,
    form: str,
    only_rest: bool,
) -> None:
    """Print a randomised complete-block run order with distinct seeds."""
    from auditd.pipeline.planning import schedule_of
    from auditd.schedule import schedule_csv, schedule_document

    if only_rest and seed is None:
        raise click.UsageError("--rest needs the --seed with which the schedule was made", context)
    made = schedule_of(
        plan_path(context),
        replicates=replicates,
        hosts=None if hosts is None else [host.strip() for host in hosts.split(",")],
        seed=seed,
        only_rest=only_rest,
    )
    if form == "json":
        print_json(schedule_document(made))
    else:
        click.echo(schedule_csv(made), nl=False)
    if seed is None:
        message(f"made with --seed {made.entropy}; keep it for `schedule --rest`")
