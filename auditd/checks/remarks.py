"""What has to be known beside a finding's numbers: that an effect is tiny, or that a p-value is too small."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec

from auditd.checks.answer import Answer
from auditd.checks.check import Check

SERIAL = ("von_neumann_rank", "ljung_box")
BY_SERIAL = ("mann_kendall", "pettitt", "selected_shift")
"""Checks whose p-values are too small where neighbours are alike."""


def tiny(answer: Answer, check: Check, *, spread: float, margin: float | None) -> str | None:
    """Return the remark that an effect found with certainty is tiny: its whole interval is small.

    Parameters
    ----------
    spread : standard deviation of the runs within cells, on the audited scale.
    margin : smallest difference that matters, by the plan.
    """
    effect = answer.effect
    if answer.verdict != "dependence" or effect is None or effect.low is None or effect.high is None:
        return None
    largest = max(abs(effect.low), abs(effect.high))
    if check.unit == "share":
        bound, named = check.tiny, f"{check.tiny:g}"
    elif margin is not None:
        bound, named = margin, f"the margin of {margin:g}"
    else:
        bound, named = check.tiny * spread, f"{check.tiny:g} of a run's standard deviation"
    if largest >= bound:
        return None
    return f"certain and tiny: the whole interval of the effect lies within ± {named}"


def with_serial_remarks(answers: Sequence[Answer]) -> list[Answer]:
    """Say of trends and shifts that their p-values are too small, where neighbours are alike too."""
    serial = {(a.response, a.along) for a in answers if a.check in SERIAL and a.verdict == "dependence"}
    return [
        joined(one, "neighbours are alike too, so the p-value is too small: a step, a trend and slow "
               "correlation show in each other's tests")
        if one.check in BY_SERIAL and one.verdict == "dependence" and (one.response, one.along) in serial
        else one
        for one in answers
    ]  # fmt: skip


def joined(answer: Answer, remark: str | None) -> Answer:
    """Return the answer with one more remark."""
    if remark is None:
        return answer
    reason = remark if answer.reason is None else f"{answer.reason}; {remark}"
    return msgspec.structs.replace(answer, reason=reason)
