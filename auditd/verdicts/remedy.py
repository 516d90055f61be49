"""What to do now about a finding, and what it costs in runs."""

from __future__ import annotations

import math
from collections.abc import Callable

from auditd.plan import Plan
from auditd.records import Finding

BY_LOSS = ("drift", "serial", "batch", "spread", "clock", "lineage")
"""Kinds whose remedy is a blocked, randomised repetition of the affected cells, sized by what was lost."""
BY_RUNS_AGAIN = ("seed", "repeat", "confound", "failure", "cap", "gap", "order")
"""Kinds whose runs to be made (again) are counted: `Finding.n_again`; `lineage` too, where it is a fact."""


def cost_runs(
    finding: Finding, *, n_lost: float | None = None, n_cells: int = 1, n_levels: int = 1
) -> int | None:
    """Return the runs that the remedy costs; None where that cannot be said yet.

    Parameters
    ----------
    finding : what is to be mended.
    n_lost : effective runs lost in the affected cells, n − n_effective, for kinds of `BY_LOSS`.
    n_cells : cells affected. A complete block holds each of them once on one level of the nuisance, and
        each of its runs is worth about one independent run, so whole blocks are counted.
    n_levels : levels of the nuisance that the repetition is to be spread over evenly.
    """
    if finding.kind in BY_RUNS_AGAIN or (finding.kind == "lineage" and finding.n_again is not None):
        return finding.n_again
    if finding.kind not in BY_LOSS:
        return 0
    if n_lost is None:
        return None
    n_blocks = math.ceil(max(0.0, n_lost) / max(1, n_cells))
    n_blocks = math.ceil(n_blocks / max(1, n_levels)) * max(1, n_levels)
    return n_blocks * max(1, n_cells)


def remedy(
    finding: Finding,
    plan: Plan,
    *,
    n_lost: float | None = None,
    n_cells: int = 1,
    n_levels: int = 1,
    cause: str | None = None,
) -> str:
    """Return one or two sentences of what to do now, ending with the cost in runs.

    `n_lost`, `n_cells` and `n_levels` are those of `cost_runs`; `cause` is `likely_cause`'s answer.
    """
    advice = _ADVICE[finding.kind](finding, plan)
    if cause is not None:
        advice = f"Look first at what changed: {cause}. {advice}"
    return (
        f"{advice} "
        f"{_cost_told(finding, cost_runs(finding, n_lost=n_lost, n_cells=n_cells, n_levels=n_levels))}"
    )


def _cost_told(finding: Finding, n_runs: int | None) -> str:
    if n_runs is None:
        return "Cost: not known yet; `runaudit evidence` says it once the loss can be estimated, in runs."
    if n_runs == 0:
        none_lost = finding.kind in BY_LOSS and finding.response is not None
        return "Cost: no runs; none of their worth is lost so far." if none_lost else "Cost: no runs."
    about = "about " if finding.kind in {*BY_LOSS, "order"} else ""
    about = "at least " if finding.kind == "confound" else about
    return f"Cost: {about}{n_runs:,} {'run' if n_runs == 1 else 'runs'}."


def _place(finding: Finding) -> str:
    if finding.along in {None, "order"}:
        return "the affected cells"
    level = f" {finding.level}" if finding.level is not None else ""
    return f"the affected cells on {finding.along}{level}"


def _drift(finding: Finding, _plan: Plan) -> str:
    if finding.along in {None, "order"}:
        return (
            "Stop the drift at its source, then repeat the affected cells in complete blocks, in random "
            "order within each (`runaudit schedule --rest`); `runaudit answer … --restart` once it is "
            "mended."
        )
    where = f"{finding.along} {finding.level}" if finding.level is not None else f"each {finding.along}"
    return (
        f"Take {where} out of use until it is looked at, and repeat its cells in randomised blocks "
        "elsewhere; set its runs aside or absorb the shift with `runaudit answer`."
    )


def _serial(finding: Finding, _plan: Plan) -> str:
    return (
        "Look for state that runs leave behind (heat, caches, a warm pool, a generator that goes on); "
        f"until it is gone, repeat {_place(finding)} in random order and let `runaudit compare` widen the "
        "intervals."
    )


def _batch(finding: Finding, _plan: Plan) -> str:
    along = finding.along or "level"
    return (
        f"Run every cell on every {along} equally often, in random order, and compare within {along}s; "
        f"more runs on the same {along}s do not help against differences between them."
    )


def _spread(finding: Finding, _plan: Plan) -> str:
    return (
        f"Find what made {_place(finding)} noisier or quieter; intervals that assume one scatter no "
        "longer hold. Repeat them in randomised blocks under one setting."
    )


def _clock(_finding: Finding, _plan: Plan) -> str:
    return (
        "Spread every cell over all hours of the cycle, in complete blocks no longer than a part of it, "
        "or run in its quiet hours only; find what runs beside the campaign then."
    )


def _lineage(finding: Finding, _plan: Plan) -> str:
    if finding.key == "lineage:missing":
        return "Land the parents' records, or say in them what the runs started from."
    if finding.key == "lineage:cycle":
        return "Correct the parents in the records: a run cannot come of itself."
    return (
        "Count each restart chain as one run, or repeat the children from a fresh start with seeds of "
        "their own."
    )


def _repeat(finding: Finding, _plan: Plan) -> str:
    if finding.key.startswith("repeat:factor"):
        return (
            "Check that the factor between these cells reaches the program; if it cannot change results, "
            "leave it out of the factors or name the cells under design.deterministic."
        )
    if "ignored seed" in finding.message:
        cell = finding.cells[0] if finding.cells else "that cell"
        return (
            f"Check how the seed reaches the program in {cell}; its runs count as one. If it is "
            "deterministic by nature, name it under design.deterministic, else repeat its runs with "
            "seeds that take effect."
        )
    return (
        "Switch off or key the cache (or mend the copying step) so that the seed is part of the key, and "
        "repeat the runs that were answered from it; until then they count once."
    )


def _seed(_finding: Finding, plan: Plan) -> str:
    if plan.seeds.role == "unique":
        return (
            "Repeat the later run of each pair with a fresh seed; draw seeds from one sequence "
            "(`runaudit schedule`). "
            'If shared seeds are intended, say so by seeds.role = "block".'
        )
    return (
        "Within a cell a seed serves one run: repeat the later run of each pair with the seed of another "
        "block."
    )


def _confound(finding: Finding, _plan: Plan) -> str:
    along = finding.along or "nuisance"
    on = f" other than {finding.level}" if finding.level is not None else ""
    what = ", ".join(finding.cells[:3]) if finding.cells else "the levels concerned"
    return (
        f"Run {what} on a {along}{on} too, and the cells it is compared with beside it, in random order; "
        "no analysis can part them afterwards."
    )


def _order(finding: Finding, _plan: Plan) -> str:
    if finding.key.startswith("order:late"):
        return "Order by a sequence number or start time that every run states, or raise order.patience."
    if finding.key.startswith("order:landing"):
        return (
            "State a sequence number or start time and order by it: the order of landing is no order to "
            "audit."
        )
    factor = finding.along or "the factors"
    return (
        "Put the remaining runs into random order in complete blocks (`runaudit schedule --rest`); what "
        f"differs along {factor} so far may as well be time."
    )


def _time(finding: Finding, _plan: Plan) -> str:
    where = f" of {finding.along} {finding.level}" if finding.level is not None else ""
    if finding.key.startswith("time:overlap"):
        return (
            f"See whether two runs share the machine{where} or its clock was set back; if it may hold "
            "more runs, say so by machines.slots. Set disturbed runs aside with `runaudit answer`."
        )
    return (
        f"Check the clock{where} (time service, zone), and order by a sequence number while it is not "
        "trusted."
    )


def _gap(finding: Finding, _plan: Plan) -> str:
    if finding.key == "gap:twice":
        return (
            "Give each run a number of its own in the records; `runaudit amend` to order by start time "
            "meanwhile."
        )
    return (
        "Find out why these runs never landed; land failed ones with their status, and make up the rest. "
        "If failing depends on the result, the means of what landed are off."
    )


def _rewrite(_finding: Finding, _plan: Plan) -> str:
    return (
        "Find what wrote the record again and which version is right; the first one stays in the audit. "
        "Answer the warning, or set the run aside."
    )


def _failure(finding: Finding, _plan: Plan) -> str:
    where = f"{finding.along} {finding.level}" if finding.along not in {None, "order"} else "that stretch"
    return (
        f"Look at what failed in {where}, then make these runs up in the cells that lost them, in random "
        "order; compare completion rates before means."
    )


def _cap(finding: Finding, _plan: Plan) -> str:
    response = finding.response or "the response"
    return (
        f"Raise the limit and repeat the runs that met it, or compare {response} by medians or as "
        "censored; means of capped values are not means."
    )


def _silence(_finding: Finding, _plan: Plan) -> str:
    return (
        "See whether the campaign still runs and its results reach the landing; nothing is known meanwhile."
    )


def _plan_changed(_finding: Finding, _plan: Plan) -> str:
    return "Report the change with its reason; call results exploratory where runs seen before decided it."


_ADVICE: dict[str, Callable[[Finding, Plan], str]] = {
    "drift": _drift,
    "serial": _serial,
    "batch": _batch,
    "spread": _spread,
    "clock": _clock,
    "lineage": _lineage,
    "repeat": _repeat,
    "seed": _seed,
    "confound": _confound,
    "order": _order,
    "time": _time,
    "gap": _gap,
    "rewrite": _rewrite,
    "failure": _failure,
    "cap": _cap,
    "silence": _silence,
    "plan": _plan_changed,
}
