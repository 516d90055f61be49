"""What an epoch's audit of one response is opened with."""

from __future__ import annotations

import math
from dataclasses import dataclass

from auditd.errors import BadInput

BASELINES = ("cells", "pooled", "formula")


@dataclass(frozen=True, kw_only=True)
class Options:
    """Options of an audit, fixed when its epoch opens.

    Attributes
    ----------
    nuisances : names of the nuisances along which is asked.
    baseline : "cells", "pooled" or "formula".
    has_times : whether runs have times, so that `clock` can be asked.
    has_parents : whether runs state parents, so that `lineage` can be asked.
    alarm_budget : probability of any alarm under exchangeability, over the epoch and all its responses.
    n_responses : responses that share the budget.
    n_asked : K, the number of e-processes over all responses; families × n_responses when None.
    response : name that enters the randomisers.
    key : key of the randomisers, at most 64 bytes.
    withheld : kinds that are not asked because the null is false by design, such as "drift" in a sweep.
    """

    nuisances: tuple[str, ...] = ()
    baseline: str = "cells"
    has_times: bool = False
    has_parents: bool = False
    alarm_budget: float = 0.05
    n_responses: int = 1
    n_asked: int | None = None
    response: str = ""
    key: bytes = b""
    withheld: tuple[str, ...] = ()

    def check(self) -> None:
        """Raise BadInput for options that make no sense."""
        if self.baseline not in BASELINES:
            raise BadInput(f"baseline must be one of {', '.join(BASELINES)}, got {self.baseline!r}")
        budget = self.alarm_budget
        if not (isinstance(budget, float | int) and math.isfinite(budget) and 0.0 < budget < 1.0):
            raise BadInput(f"alarm_budget must lie strictly between 0 and 1, got {budget!r}")
        if not isinstance(self.n_responses, int) or self.n_responses < 1:
            raise BadInput(f"n_responses must be a whole number of at least 1, got {self.n_responses!r}")
        if "order" in self.nuisances:
            raise BadInput('a nuisance cannot be named "order": that name means the order of the runs')
        if len(set(self.nuisances)) != len(self.nuisances):
            raise BadInput(f"nuisance names must differ, got {', '.join(self.nuisances)}")
