"""A check's answer in the full audit."""

from __future__ import annotations

from typing import Literal

import msgspec

from auditd.records import Effect

Family = Literal["dependence", "design", "shape"]
Verdict = Literal["dependence", "no evidence", "not testable", "departure"]
"""`departure` is said of shape and spread only."""
LEVEL = 0.05
"""Adjusted p-value up to which a finding is taken as evidence (convention)."""
Z = 1.959963984540054
"""Normal quantile of the effects' 95 % intervals."""


class Answer(msgspec.Struct, frozen=True, kw_only=True):
    """What one check says of one response along one order.

    `family` says with what it is adjusted: questions about dependence within a response, about the design
    over the campaign, about shape and spread within a response. `reason` says why it was not testable, or
    what has to be known beside the numbers.
    """

    check: str
    along: str
    family: Family
    null: str
    assumes: str
    source: str
    response: str | None = None
    statistic: float | None = None
    pvalue: float | None = None
    adjusted_pvalue: float | None = None
    effect: Effect | None = None
    n: int = 0
    verdict: Verdict = "no evidence"
    reason: str | None = None
