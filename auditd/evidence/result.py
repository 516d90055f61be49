"""What the public functions of this package return."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, kw_only=True)
class Contrast:
    """A comparison b − a with an interval that is honest under the dependence found.

    Attributes
    ----------
    estimate, low, high : on the scale of the values; None where the comparison cannot be estimated.
    low_any, high_any : the interval that holds however often anyone looks, from about 30 effective runs on.
    df : effective degrees of freedom of low and high.
    method : what was fitted, in words.
    estimable, reason : whether the comparison can be estimated, and why not.
    n : runs in the compared cells.
    n_effective : n × variance if the runs were independent ÷ variance under the dependence found; above n
        where order or blocks help.
    loss, loss_low, loss_high : evidence loss, 1 − n_effective / n, with an interval at the same confidence.
    naive_low, naive_high : Welch's interval, which takes the runs as independent.
    hedges_g, g_low, g_high : difference in standard deviations within cells, with an honest interval.
    confidence : of all intervals.
    weak : fewer than 10 effective runs on a side.
    floor, floor_of : half-width that further runs on the same levels of the nuisance floor_of leave, since
        its levels differ in the difference; 0 and None where no such difference is found.
    remarks : what else a reader has to know, one sentence each.
    """

    estimate: float | None
    low: float | None
    high: float | None
    low_any: float | None
    high_any: float | None
    df: float | None
    method: str
    estimable: bool
    reason: str | None
    n: int
    n_effective: float | None
    loss: float | None
    loss_low: float | None
    loss_high: float | None
    naive_low: float | None
    naive_high: float | None
    hedges_g: float | None
    g_low: float | None
    g_high: float | None
    confidence: float
    weak: bool
    floor: float = 0.0
    floor_of: str | None = None
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class EffectiveNumber:
    """How many independent runs the cells' means are worth.

    Attributes
    ----------
    n, n_effective : runs, and independent runs that would give the cells' means as exactly.
    loss, loss_low, loss_high : 1 − n_effective / n with a 95 % interval.
    parts : factor of each cause, in the order duplicates, lineage, batch, serial; their product is
        n_effective / n. A cause whose interval does not exclude "no loss" has the factor 1: what it may
        cost is in loss_high.
    detail : the estimates behind the parts, by name.
    remarks : what else a reader has to know, one sentence each.
    """

    n: int
    n_effective: float
    loss: float
    loss_low: float
    loss_high: float
    parts: Mapping[str, float]
    detail: Mapping[str, float] = field(default_factory=dict)
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class EvidenceLoss:
    """Loss of evidence of one comparison or of the cells' means, with an interval: what grades a warning."""

    loss: float
    low: float
    high: float
    estimable: bool
    reason: str | None
