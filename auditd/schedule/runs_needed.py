"""How many runs a plan needs, to see a dependence and to decide a comparison."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import NormalDist

from auditd.plan import Plan, cells_matching
from auditd.schedule.randomised_blocks import cells_of

PROBABILITY = 0.8
"""The probability that `runs_needed` is stated for; common practice in power calculations."""
SPREADS_IN_MARGINS = (0.5, 1.0, 2.0, 5.0)
"""Standard deviations of a run, in margins, that a comparison's runs are stated for; not known before."""


@dataclass(frozen=True, kw_only=True)
class RunsNeeded:
    """Runs of the whole campaign that reach a purpose with probability 0.8, or None if the plan's do not.

    `purpose` is `detect` (then `scenario` is named) or `decide` (then the response and the two sides are, and
    `spread` is the standard deviation of a run, on the audited scale, that the number holds for).
    """

    purpose: str
    runs: int | None
    probability: float = PROBABILITY
    scenario: str | None = None
    response: str | None = None
    a: str | None = None
    b: str | None = None
    margin: float | None = None
    spread: float | None = None


def runs_to_detect(scenario: str, alarms: Sequence[int | None]) -> RunsNeeded:
    """Return the runs by which 80 % of the campaigns had alarmed; `alarms` are runs from 1, or None."""
    runs = sorted(run for run in alarms if run is not None)
    place = math.ceil(PROBABILITY * len(alarms)) - 1
    return RunsNeeded(purpose="detect", scenario=scenario, runs=runs[place] if place < len(runs) else None)


def runs_to_decide(plan: Plan, *, n_cells: int) -> list[RunsNeeded]:
    """Return, for each planned comparison with a margin, the runs that decide it if there is no difference.

    Two one-sided tests inside ± margin at the plan's confidence, shared evenly by the planned comparisons
    (Bonferroni), with power 0.8: a side needs 2 s² (z(1−α) + z(1−β/2))² / margin² runs, s the standard
    deviation of a run and β = 0.2; normal approximation, independent runs. Dependence raises the number.

    References
    ----------
    Schuirmann (1987), Journal of Pharmacokinetics and Biopharmaceutics 15, 657–680. Chow, Shao & Wang (2008),
    Sample Size Calculations in Clinical Research, 2nd edition, section 3.2.
    """
    if plan.schedule is None:
        return []
    cells = cells_of(plan.schedule.levels)
    alpha = (1 - plan.campaign.confidence) / max(1, len(plan.comparisons))
    z = NormalDist().inv_cdf(1 - alpha) + NormalDist().inv_cdf(1 - (1 - PROBABILITY) / 2)
    needed = []
    for comparison in plan.comparisons:
        response = plan.responses.get(comparison.response)
        if response is None or response.margin is None:
            continue
        smallest = min(sum(cells_matching(group, cell) for cell in cells) for group in comparison.between)
        if smallest == 0:
            continue
        a, b = (" ".join(f"{name}={level}" for name, level in group.items()) for group in comparison.between)
        for spread in SPREADS_IN_MARGINS:
            a_side = math.ceil(2 * (spread * z) ** 2)
            needed.append(
                RunsNeeded(
                    purpose="decide",
                    response=comparison.response,
                    a=a,
                    b=b,
                    margin=response.margin,
                    spread=spread * response.margin,
                    runs=math.ceil(a_side / smallest) * n_cells,
                )
            )
    return needed
