"""Schedules made from a plan and from what has landed."""

from __future__ import annotations

from pathlib import Path

from auditd.errors import BadInput, StoreError
from auditd.pipeline.campaign import open_for_queries
from auditd.plan import Plan
from auditd.plan_reading import load_plan
from auditd.records import level_label, normal_level
from auditd.schedule import LandedRun, Schedule, randomised_blocks, rest
from auditd.store.runs import stored_runs
from auditd.store.tables import runs


def schedule_of(
    plan_path: Path,
    *,
    replicates: int | None,
    hosts: list[str] | None,
    seed: int | None,
    only_rest: bool,
) -> Schedule:
    """Return the plan's schedule, or what of it has not landed.

    Raises
    ------
    BadInput
        The plan has no `[schedule]` with the levels of every factor.
    """
    plan = load_plan(plan_path)
    if plan.schedule is None or set(plan.schedule.levels) != set(plan.factors) or not plan.factors:
        raise BadInput(
            "the plan has no [schedule] with levels for every factor; add, for example, "
            'levels = {solver = ["implicit", "explicit"]}'
        )
    levels = {name: [normal_level(one) for one in plan.schedule.levels[name]] for name in plan.factors}
    made = randomised_blocks(
        levels,
        plan.schedule.hosts if hosts is None else hosts,
        plan.schedule.replicates if replicates is None else replicates,
        seed,
    )
    return rest(made, _landed(plan, plan_path)) if only_rest else made


def _landed(plan: Plan, plan_path: Path) -> list[LandedRun]:
    """Return the completed runs of the store, as far as there is one."""
    try:
        campaign = open_for_queries(plan_path)
    except StoreError:
        return []
    host = host_name(plan)
    with campaign.engine.connect() as connection:
        return [
            LandedRun(
                cell=stored.run.cell,
                host=None if host is None else level_label(stored.run.nuisance.get(host)),
                seed=stored.run.seed,
            )
            for stored in stored_runs(connection, runs.c.completed)
        ]


def host_name(plan: Plan) -> str | None:
    """Return the nuisance that names machines: an exclusive one, or the one called `host`."""
    if plan.machines.exclusive:
        return plan.machines.exclusive[0]
    return "host" if "host" in plan.nuisance else None
