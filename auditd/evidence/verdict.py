"""What a comparison says about a margin, and how many runs are still needed to say it."""

from __future__ import annotations

import math
from typing import Literal

from auditd.errors import BadInput
from auditd.evidence.result import Contrast

Verdict = Literal["beyond the margin", "within the margin", "undecided"]


def verdict(contrast: Contrast, margin: float) -> Verdict:
    """Judge a comparison by two one-sided tests.

    `within the margin`: the (1 − 2α) interval lies inside ±margin, α = 1 − confidence. `beyond the margin`:
    the interval lies wholly outside. A comparison that cannot be estimated is undecided.

    Raises
    ------
    BadInput : margin not a finite positive number.

    References
    ----------
    Schuirmann (1987), Journal of Pharmacokinetics and Biopharmaceutics 15:657-680.
    """
    limit = _margin(margin)
    if contrast.low is None or contrast.high is None or contrast.estimate is None:
        return "undecided"
    if contrast.low > limit or contrast.high < -limit:
        return "beyond the margin"
    half = _narrow_half(contrast)
    if -limit < contrast.estimate - half and contrast.estimate + half < limit:
        return "within the margin"
    return "undecided"


def runs_needed(contrast: Contrast, margin: float) -> int | None:
    """Further runs in the compared cells until the comparison decides, if the estimate stays and runs are
    added in the same proportions.

    0 where it is decided; None where no number of such runs decides it: it cannot be estimated, the
    estimate lies on the margin, or the levels of `floor_of` (hosts, say) differ so much in the difference
    that the interval cannot shrink enough: then more hosts decide, not more runs on these.
    """
    limit = _margin(margin)
    if contrast.low is None or contrast.high is None or contrast.estimate is None:
        return None
    if verdict(contrast, margin) != "undecided":
        return 0
    distance = abs(abs(contrast.estimate) - limit)
    inside = abs(contrast.estimate) < limit
    half = _narrow_half(contrast) if inside else (contrast.high - contrast.low) / 2
    if distance <= 1e-9 * max(half, limit):
        return None
    floor = contrast.floor * half / ((contrast.high - contrast.low) / 2)
    if floor >= distance:
        return None
    return max(math.ceil(contrast.n * ((half**2 - floor**2) / (distance**2 - floor**2) - 1)), 1)


def _margin(margin: float) -> float:
    if isinstance(margin, bool) or not isinstance(margin, int | float) or not 0 < margin < math.inf:
        raise BadInput(f"margin: expected a finite positive number, got {margin!r}")
    return float(margin)


def _narrow_half(contrast: Contrast) -> float:
    """Half-width of the interval at 1 − 2α."""
    from scipy.special import stdtrit

    df = contrast.df or math.inf
    wide = float(stdtrit(df, 0.5 + contrast.confidence / 2))
    return (
        float((contrast.high or 0.0) - (contrast.low or 0.0))
        / 2
        * float(stdtrit(df, contrast.confidence))
        / wide
    )
