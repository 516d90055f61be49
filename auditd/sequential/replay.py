"""The sequential audit of a whole series at once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput
from auditd.sequential.alarm import Alarm, Key
from auditd.sequential.auditor import Auditor
from auditd.sequential.options import Options
from auditd.sequential.run_block import labels, numbers

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class Replay:
    """What the audit would have said after every run.

    Attributes
    ----------
    scores : (n,) z, NaN where a run is not scored: no value, or no earlier run in its cell.
    log_e : log e-value after each run, (n,), by (kind, along).
    alarms : alarms in the order in which they were raised.
    log_mean : (n,) log of the mean of the e-processes; the first alarm is where it reaches log(1/budget).
    n_asked : K, the e-processes that share the budget.
    """

    scores: FloatArray
    log_e: dict[Key, FloatArray]
    alarms: list[Alarm]
    log_mean: FloatArray
    n_asked: int


def replay(
    values: npt.ArrayLike,
    *,
    cells: npt.ArrayLike,
    nuisance: Mapping[str, npt.ArrayLike] | None = None,
    times: npt.ArrayLike | None = None,
    parents: npt.ArrayLike | None = None,
    ids: npt.ArrayLike | None = None,
    baseline: str = "cells",
    design: npt.ArrayLike | None = None,
    alarm_budget: float = 0.05,
    n_responses: int = 1,
    key: bytes = b"",
    response: str = "",
) -> Replay:
    """Audit a series of runs for broken independence, as if after every run.

    Null hypothesis: given labels and order, the joint law of the response is unchanged by permuting runs
    within cells. Alternative: serial dependence, drift, batch effects, a daily or weekly cycle, a change of
    spread, or inheritance from a parent run, from any run on. Under the null any alarm at all has probability
    at most `alarm_budget`, over all responses and however often anyone looks.

    Parameters
    ----------
    values : (n,) response in audit order; values that are not finite are not scored.
    cells : (n,) label of each run's combination of factor levels.
    nuisance : labels by nuisance, (n,) each; one in which no level has a second run is left out.
    times : (n,) POSIX seconds, NaN where unknown; asks `clock`.
    parents : (n,) 0-based index of the parent run, −1 for none; asks `lineage`. A parent that does not come
        earlier is not bet on.
    ids : (n,) run ids that enter the randomisers; the indices' text when None.
    baseline : "cells" (ranks within cells), "pooled" (deviations from cells' running means, ranked together)
        or "formula" (recursive least-squares residuals on `design`, ranked together).
    design : (n, p) for baseline "formula", with its constant column.
    alarm_budget : probability in (0, 1).
    n_responses : responses that share the budget.
    key : key of the randomisers, at most 64 bytes.
    response : name of the response; enters the randomisers.

    Returns
    -------
    Replay

    Raises
    ------
    BadInput : lengths that differ, labels or numbers that are none, a budget outside (0, 1), parents outside
        the series, an unknown baseline, a missing design.

    Assumptions: see `Auditor`; order and labels must not depend on the responses.

    References
    ----------
    Vovk, Gammerman & Shafer (2005), Algorithmic Learning in a Random World. Ville (1939), Étude critique de
    la notion de collectif. Ramdas, Grünwald, Vovk & Shafer (2023), Statistical Science 38: e-processes.
    """
    if nuisance is not None and not isinstance(nuisance, Mapping):
        raise BadInput(f"nuisance must map names to labels, got {type(nuisance).__name__}")
    n = numbers(values, "values", ndim=1).size
    listed = {str(name): labels(given, f"nuisance {name!r}", n) for name, given in (nuisance or {}).items()}
    listed = {name: given for name, given in listed.items() if len(set(given)) < n}
    if parents is not None and (numbers(parents, "parents", ndim=1) >= n).any():
        raise BadInput(f"parents must lie below the number of runs, {n}")
    auditor = Auditor(
        Options(
            nuisances=tuple(listed),
            baseline=baseline,
            has_times=times is not None,
            has_parents=parents is not None,
            alarm_budget=alarm_budget,
            n_responses=n_responses,
            key=key,
            response=response,
        )
    )
    advanced = auditor.advance(
        values,
        cells,
        ids=[str(i) for i in range(n)] if ids is None else ids,
        nuisance=listed,
        times=times,
        parents=parents,
        design=design,
    )
    return Replay(
        scores=advanced.scores,
        log_e=advanced.log_e,
        alarms=list(advanced.alarms),
        log_mean=advanced.log_mean,
        n_asked=auditor.n_asked,
    )
