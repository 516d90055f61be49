"""`runaudit status`."""

from __future__ import annotations

from typing import Any

import click

from auditd.cli.options import at_least_option, json_option, plan_path
from auditd.cli.output import number, percent, print_json, print_table, safe, worth
from auditd.records import Grade
from auditd.series.strip_line import NAME_WIDTH, shortened, strip_line

EXPLAINED = """\
  (worth: of the runs, for the cells' means; lost: by the planned comparison that loses most;
  the last three: what this design would have shown by now with probability 0.8)
"""


@click.command(epilog="Example: runaudit status --json")
@json_option
@at_least_option
@click.pass_context
def status(context: click.Context, as_json: bool, at_least: Grade | None) -> int:
    """Show daemon, files, runs, evidence and warnings. Exit 1 if a warning stands."""
    from auditd.pipeline.asking import now_utc, standing_at_least, status_document
    from auditd.pipeline.campaign import open_for_queries

    campaign = open_for_queries(plan_path(context))
    document = status_document(campaign, now_utc())
    if as_json:
        print_json(document)
    else:
        _print(campaign.plan.campaign.title, document)
    return int(standing_at_least(campaign, at_least or "material"))


def _print(title: str, document: dict[str, Any]) -> None:  # the JSON document
    click.echo(safe(title))
    click.echo(f"  daemon    {_daemon(document['daemon'])}")
    click.echo(
        f"  runs      {document['runs']} landed, {document['completed']} completed, "
        f"{document['refused']} refused, {document['waiting']} waiting for a place, {document['late']} late"
    )
    click.echo(f"  audited   {document['audited']} in order, {document['scored']} scored")
    for reason in document["withheld"]:
        click.echo(f"  withheld  {safe(reason)}")
    for waiting in document["daemon"].get("files_waiting", []):
        click.echo(
            f"  waiting   {safe(waiting['path'])} for {waiting['age_s']:.0f} s: {safe(waiting['why'])}"
        )
    alerts = document["alerts"]
    if any(alerts[state] for state in ("due", "delivered", "dead")):
        click.echo(
            f"  alerts    {alerts['delivered']} delivered, {alerts['due']} due, {alerts['dead']} given up"
            + (f"; last failure: {safe(alerts['last_error'])}" if alerts["last_error"] else "")
        )
    _print_responses(document["responses"])
    _print_strips(document["strips"])
    standing = document["warnings"]
    grades = ", ".join(f"{count} {grade}" for grade, count in standing["by_grade"].items() if count)
    click.echo(f"  warnings  {grades + ' standing; see `runaudit warnings`' if grades else 'none standing'}")
    if not grades:
        click.echo(
            "            (no warning is not proof of independence; see what would have been seen above)"
        )


def _print_strips(strips: dict[str, list[float]]) -> None:
    lines = [(name, strip_line(means)) for name, means in strips.items() if means]
    if not lines:
        return
    for name, line in lines:
        click.echo(f"  {shortened(safe(name), NAME_WIDTH):<{NAME_WIDTH}} {line}")
    click.echo("  (in order, less the cells' own levels: _ - below, o at them, + ^ above)\n")


def _daemon(daemon: dict[str, Any]) -> str:  # part of the JSON document
    if daemon["pid"] is None:
        return "has never run here; start it with `runaudit watch`"
    where = f"process {daemon['pid']} on {safe(daemon['host'])}"
    if daemon["ended"]:
        return f"stopped ({where}, {_ago(daemon['beat_age_s'])}); start it with `runaudit watch`"
    if not daemon["alive"]:
        return f"NOT RUNNING ({where}, last sign of life {_ago(daemon['beat_age_s'])})"
    watching = f"{daemon['watch']}" + (f", {safe(daemon['watch_reason'])}" if daemon["watch_reason"] else "")
    trouble = f"; {safe(daemon['trouble'])}" if daemon["trouble"] else ""
    return f"alive ({where}, {_ago(daemon['beat_age_s'])}, watching by {watching}){trouble}"


def _ago(age_s: float) -> str:
    for unit, unit_s in (("d", 86_400), ("h", 3600), ("min", 60)):
        if age_s >= 2 * unit_s:
            return f"{age_s / unit_s:.0f} {unit} ago"
    return f"{age_s:.0f} s ago"


def _print_responses(responses: dict[str, Any]) -> None:  # part of the JSON document
    if not responses:
        return
    click.echo("")
    rows = []
    for name, shown in responses.items():
        would = shown.get("would_see") or {}
        rows.append(
            (
                name,
                shown["n"],
                worth(shown["n_effective"]),
                percent(shown["evidence_loss"]),
                number(would.get("drift")),
                number(would.get("icc")),
                number(would.get("ar")),
            )
        )
    headers = ("response", "runs", "worth", "lost", "drift (sd)", "ICC", "lag-1")
    print_table(
        ["  " + headers[0], *headers[1:]], [["  " + row[0], *row[1:]] for row in rows], right=range(1, 7)
    )
    click.echo(EXPLAINED)
