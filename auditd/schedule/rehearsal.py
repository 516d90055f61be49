"""What a plan would find, and how wide its intervals would be, by carrying it out many times on paper."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from auditd.errors import BadInput
from auditd.plan import Plan, cells_matching
from auditd.records import cell_label
from auditd.schedule.binomial_bounds import clopper_pearson
from auditd.schedule.randomised_blocks import cells_of
from auditd.schedule.runs_needed import RunsNeeded, runs_to_decide, runs_to_detect
from auditd.schedule.scenarios import DEFAULT_SCENARIOS, EXCHANGEABLE, Scenario
from auditd.simulate import Layout, Simulated, blocked_layout, simulate

AUTO_SHARE, FACT_SHARE = 0.1, 0.1
"""Shares of the alarm budget: of `duration` and `completed` together, and of the facts that count."""
FIRST_EPOCH = 6 / math.pi**2
"""Share of the budget that the first epoch may spend; a repair or an amendment begins the next."""
DAYS = 14.0
"""Length of a rehearsed campaign, since a plan does not say how long a run takes; matters to `cycle` only."""
DAY_S = 86400.0
MAX_CAMPAIGNS = 100_000

Progress = Callable[[int, int], None]


@dataclass(frozen=True, kw_only=True)
class ScenarioResult:
    """What the campaigns of one scenario gave.

    Attributes
    ----------
    name, kind, strength : the scenario's.
    alarm_share, alarm_low, alarm_high : share of campaigns with any alarm, with Clopper–Pearson bounds. For
        exchangeable runs over all responses, so that it compares with the alarm budget; else of one response.
    median_run : the number of runs by which half of the campaigns had alarmed; None if fewer ever did.
    lead_share : of the campaigns that alarmed, the share whose first warning named the right kind and order.
    coverage, coverage_low, coverage_high : share of the honest intervals of the compared difference that hold
        the true one; None where there is nothing to compare.
    width, naive_width : median widths of the honest and the naive interval, in standard deviations of a run.
    """

    name: str
    kind: str
    strength: float
    alarm_share: float
    alarm_low: float
    alarm_high: float
    median_run: int | None
    lead_share: float | None
    coverage: float | None
    coverage_low: float | None
    coverage_high: float | None
    width: float | None
    naive_width: float | None


@dataclass(frozen=True, kw_only=True)
class Rehearsal:
    """All scenarios, the exchangeable one first; `remarks` say what the rehearsal leaves out."""

    campaigns: int
    scenarios: tuple[ScenarioResult, ...]
    runs_needed: tuple[RunsNeeded, ...]
    remarks: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class _Stage:
    """What of the plan a rehearsal needs."""

    cells: tuple[str, ...]
    hosts: tuple[str, ...]
    replicates: int
    host_name: str
    baseline: str
    n_responses: int
    alarm_budget: float
    confidence: float
    sides: tuple[list[str], list[str]] | None

    @property
    def n_runs(self) -> int:
        return len(self.cells) * max(1, len(self.hosts)) * self.replicates


@dataclass(frozen=True, kw_only=True)
class _Outcome:
    """One campaign: the run (from 1) of its first alarm, whether that named the cause, and the interval."""

    run: int | None
    named: bool
    covered: bool | None
    width: float
    naive_width: float


def rehearse(
    plan: Plan,
    scenarios: Sequence[Scenario] = DEFAULT_SCENARIOS,
    n_campaigns: int = 200,
    seed: int = 0,
    *,
    progress: Progress | None = None,
) -> Rehearsal:
    """Carry the plan out on paper under each scenario, with the audit and the comparison that it would get.

    Campaigns are laid out in randomised complete blocks by `[schedule]`, errors are normal with a standard
    deviation of one on the audited scale, and all cells are equal, so the true difference is zero.

    Parameters
    ----------
    plan : with a `[schedule]`.
    scenarios : what to suppose; exchangeable runs come first whether named or not. Those along a host are
        left out, with a remark, where the schedule names fewer than two.
    n_campaigns : campaigns a scenario.
    seed : everything follows from it.
    progress : called with campaigns done and in all.

    Raises
    ------
    BadInput : no `[schedule]`, a factor without levels there, or counts out of range.

    Assumptions
    -----------
    Normal errors: the alarms' share under exchangeable runs holds for any law, detection and widths do not;
    with heavy tails ranks find sooner and intervals are wider. Runs are taken in the order of their schedule.
    """
    if not 1 <= n_campaigns <= MAX_CAMPAIGNS:
        raise BadInput(f"n_campaigns is {n_campaigns}; 1 to {MAX_CAMPAIGNS} are expected")
    if seed < 0:
        raise BadInput(f"seed is {seed}; a whole number from 0 is expected")
    stage, remarks = _stage_of(plan)
    chosen, left_out = _playable(scenarios, stage)
    results, needed = [], []
    for number, scenario in enumerate(chosen):
        rng = np.random.default_rng([seed, number])
        outcomes = []
        for i in range(n_campaigns):
            outcomes.append(_played(stage, scenario, rng))
            if progress is not None:
                progress(number * n_campaigns + i + 1, len(chosen) * n_campaigns)
        results.append(_summed_up(scenario, outcomes))
        if scenario.kind != EXCHANGEABLE.kind:
            needed.append(runs_to_detect(scenario.name, [outcome.run for outcome in outcomes]))
    needed += runs_to_decide(plan, n_cells=len(stage.cells))
    return Rehearsal(
        campaigns=n_campaigns,
        scenarios=tuple(results),
        runs_needed=tuple(needed),
        remarks=(*remarks, *left_out),
    )


def rehearsal_document(rehearsal: Rehearsal) -> dict[str, Any]:  # Any: a JSON document
    """Return the rehearsal as `rehearse --json` writes it."""
    from dataclasses import asdict

    return {"schema": 1, **asdict(rehearsal)}


def _stage_of(plan: Plan) -> tuple[_Stage, tuple[str, ...]]:
    if plan.schedule is None:
        raise BadInput("the plan has no [schedule]; state replicates, hosts and the levels of each factor")
    missing = [name for name in plan.factors if name not in plan.schedule.levels]
    if missing or not plan.schedule.levels:
        raise BadInput(f"schedule.levels lacks {', '.join(missing) or 'every factor'}; state its levels")
    cells = cells_of(plan.schedule.levels)
    has_auto = plan.record.status is not None or None not in {plan.record.started, plan.record.finished}
    labels = tuple(cell_label(cell) for cell in cells)
    sides: tuple[list[str], list[str]] | None = (
        (list(labels[:1]), list(labels[1:2])) if len(cells) > 1 else None
    )
    if plan.comparisons:
        a, b = (
            [label for label, cell in zip(labels, cells, strict=True) if cells_matching(group, cell)]
            for group in plan.comparisons[0].between
        )
        sides = (a, b) if a and b else None
    stage = _Stage(
        cells=labels,
        hosts=tuple(plan.schedule.hosts),
        replicates=plan.schedule.replicates,
        host_name=_machine_nuisance(plan),
        baseline="cells" if plan.baseline.kind == "cells" else "pooled",
        n_responses=len(plan.responses),
        alarm_budget=plan.campaign.alarm_budget * FIRST_EPOCH * (1 - FACT_SHARE - AUTO_SHARE * has_auto),
        confidence=plan.campaign.confidence,
        sides=sides,
    )
    return stage, tuple(_remarks_on(plan, has_auto=has_auto))


def _machine_nuisance(plan: Plan) -> str:
    """Return the nuisance that the schedule's hosts are levels of: an exclusive one, `host`, or the first."""
    stated = [name for name, place in plan.nuisance.items() if isinstance(place, str)]
    return next(
        iter([*plan.machines.exclusive, *(name for name in stated if name == "host"), *stated]), "host"
    )


def _remarks_on(plan: Plan, *, has_auto: bool) -> list[str]:
    remarks = []
    if has_auto:
        remarks.append("duration and completed, with a tenth of the budget, are not rehearsed")
    if plan.baseline.kind == "formula":
        remarks.append("a formula's baseline is rehearsed as pooled deviations from the cells' running means")
    if plan.design.allocation == "outcome":
        remarks.append("results decide what runs next: the audit withholds what this rehearsal shows")
    if plan.seeds.role == "block":
        remarks.append("seed blocks are rehearsed as separate seeds; paired intervals will be narrower")
    return remarks


def _playable(scenarios: Sequence[Scenario], stage: _Stage) -> tuple[list[Scenario], list[str]]:
    """Put the exchangeable scenario first and leave out those that need hosts where there are none."""
    others = [scenario for scenario in scenarios if scenario.kind != EXCHANGEABLE.kind]
    played = [scenario for scenario in others if scenario.along != "host" or len(stage.hosts) > 1]
    left_out = [f"{s.name} needs two hosts in [schedule]; it is left out" for s in others if s not in played]
    return [EXCHANGEABLE, *played], left_out


def _played(stage: _Stage, scenario: Scenario, rng: np.random.Generator) -> _Outcome:
    """Lay out, simulate, audit and compare one campaign."""
    layout = _rehearsed_layout(stage, rng)
    made = simulate(layout, rng, effects=scenario.effects(layout, stage.host_name))
    run, named = _rehearsed_alarm(made, stage, scenario)
    if scenario.kind == EXCHANGEABLE.kind:  # any response may cry wolf
        others = [
            _rehearsed_alarm(simulate(layout, rng), stage, scenario)[0] for _ in range(stage.n_responses - 1)
        ]
        run = min((own for own in (run, *others) if own is not None), default=None)
    covered, width, naive_width = _rehearsed_interval(made, stage)
    return _Outcome(run=run, named=named, covered=covered, width=width, naive_width=naive_width)


def _rehearsed_layout(stage: _Stage, rng: np.random.Generator) -> Layout:
    hosts = stage.hosts or ("",)
    run_s = DAYS * DAY_S * len(hosts) / stage.n_runs
    made = blocked_layout(rng, cells=stage.cells, hosts=hosts, replicates=stage.replicates, run_s=run_s)
    nuisance = {stage.host_name: made.nuisance["host"]} if len(hosts) > 1 else {}
    return replace(made, nuisance=nuisance)


def _rehearsed_alarm(made: Simulated, stage: _Stage, scenario: Scenario) -> tuple[int | None, bool]:
    from auditd.sequential import replay

    audit = replay(
        **made.arguments(),
        baseline=stage.baseline,
        alarm_budget=stage.alarm_budget,
        n_responses=stage.n_responses,
    )
    if not audit.alarms:
        return None, False
    first = audit.alarms[0]
    along = stage.host_name if scenario.along == "host" else scenario.along
    named = first.kind == scenario.kind and along in {None, first.along}
    return first.index + 1, named


def _rehearsed_interval(made: Simulated, stage: _Stage) -> tuple[bool | None, float, float]:
    """Return whether the honest interval holds the true difference of zero, and both widths."""
    from auditd.evidence import contrast

    if stage.sides is None:
        return None, np.nan, np.nan
    found = contrast(
        made.values,
        cells=made.cells,
        a=stage.sides[0],
        b=stage.sides[1],
        nuisance=made.nuisance,
        confidence=stage.confidence,
    )
    if not found.estimable or found.low is None or found.high is None:
        return None, np.nan, np.nan
    naive = np.nan
    if found.naive_low is not None and found.naive_high is not None:
        naive = found.naive_high - found.naive_low
    return found.low <= 0.0 <= found.high, found.high - found.low, naive


def _summed_up(scenario: Scenario, outcomes: Sequence[_Outcome]) -> ScenarioResult:
    n = len(outcomes)
    runs = sorted(outcome.run for outcome in outcomes if outcome.run is not None)
    low, high = clopper_pearson(len(runs), n)
    n_named = sum(outcome.named for outcome in outcomes)
    judged = [outcome.covered for outcome in outcomes if outcome.covered is not None]
    bounds = clopper_pearson(sum(judged), len(judged)) if judged else (None, None)
    return ScenarioResult(
        name=scenario.name,
        kind=scenario.kind,
        strength=scenario.strength,
        alarm_share=len(runs) / n,
        alarm_low=low,
        alarm_high=high,
        median_run=runs[(n - 1) // 2] if len(runs) > (n - 1) // 2 else None,
        lead_share=n_named / len(runs) if runs and scenario.kind != EXCHANGEABLE.kind else None,
        coverage=sum(judged) / len(judged) if judged else None,
        coverage_low=bounds[0],
        coverage_high=bounds[1],
        width=_finite_median(np.asarray([outcome.width for outcome in outcomes])),
        naive_width=_finite_median(np.asarray([outcome.naive_width for outcome in outcomes])),
    )


def _finite_median(values: NDArray[np.float64]) -> float | None:
    kept = values[np.isfinite(values)]
    return float(np.median(kept)) if kept.size else None
