"""`runaudit rehearse`."""

from __future__ import annotations

import click

from auditd.cli.options import json_option, plan_path
from auditd.cli.output import number, percent, print_json, print_table, safe
from auditd.cli.progress import counting

EXPLAINED = """\
  alarm: campaigns that alarm, with its 95 % interval; exchangeable is without dependence, so false alarms
  median run: when the alarm comes; named: share of alarms that name the supposed kind first
  coverage: honest intervals that hold the true difference; width, naive: of both intervals, in sd of a run"""


@click.command(epilog="Example: runaudit rehearse --scenario icc=0.1 --scenario ar=0.3")
@click.option("--scenario", "scenarios", multiple=True, metavar="NAME=SIZE", help="A dependence to suppose.")
@click.option("--campaigns", type=click.IntRange(1, 100_000), default=200, show_default=True, metavar="N")
@click.option("--seed", type=click.IntRange(min=0), default=0, show_default=True, metavar="S")
@json_option
@click.pass_context
def rehearse(
    context: click.Context, scenarios: tuple[str, ...], campaigns: int, seed: int, as_json: bool
) -> None:
    """Simulate the plan. False alarms, when dependences would be found, and how honest intervals are."""
    from auditd.plan_reading import load_plan
    from auditd.schedule import DEFAULT_SCENARIOS, scenario_named
    from auditd.schedule import rehearse as carry_out
    from auditd.schedule.rehearsal import rehearsal_document

    chosen = [scenario_named(name) for name in scenarios] or list(DEFAULT_SCENARIOS)
    with counting("rehearsing") as progress:
        found = carry_out(load_plan(plan_path(context)), chosen, campaigns, seed, progress=progress)
    document = rehearsal_document(found)
    if as_json:
        print_json(document)
        return
    rows = [
        (
            one["name"],
            percent(one["alarm_share"]),
            f"{percent(one['alarm_low'])} to {percent(one['alarm_high'])}",
            number(one["median_run"]),
            percent(one["lead_share"]),
            percent(one["coverage"]),
            number(one["width"]),
            number(one["naive_width"]),
        )
        for one in document["scenarios"]
    ]
    headers = ["supposed", "alarm", "interval", "median run", "named", "coverage", "width", "naive"]
    print_table(headers, rows, right=range(1, 8))
    click.echo(EXPLAINED)
    for remark in document["remarks"]:
        click.echo(f"  {safe(remark)}")
