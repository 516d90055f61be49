"""One sentence that says what is so, where, since when and by how much."""

from __future__ import annotations

from auditd.records import Effect, Finding
from auditd.verdicts.moments import Dated, Moment, when

N_CELLS_TOLD = 3
"""Cells that a sentence names; the others are counted."""
SEQUENTIAL = ("serial", "drift", "batch", "spread", "clock", "lineage")
"""Kinds whose message is made here; facts bring their own."""


def message(
    finding: Finding,
    *,
    dated: Dated | None = None,
    cause: str | None = None,
    confidence: float = 0.95,
    unit: str | None = None,
) -> str:
    """Return a finding's sentence.

    Parameters
    ----------
    finding : a sequential finding, or a fact, whose own message is returned as it is (with the cause).
    dated : since when, as runs with times; without it the finding's run is named.
    cause : what changed there, from `likely_cause`.
    confidence : level of the effect's interval.
    unit : unit of the effect, where it has one.
    """
    because = f"; {cause}" if cause else ""
    if finding.message and (finding.kind not in SEQUENTIAL or finding.key.startswith("lineage:")):
        return finding.message + because
    amount = _amount(finding.effect, confidence, unit)
    return f"{_what(finding)}{amount}{_since(finding, dated)}{because}"


def _what(finding: Finding) -> str:
    response = finding.response or "the response"
    on = _on(finding) + _in_cells(finding)
    along = finding.along if finding.along not in {None, "order"} else None
    sentences = {
        "drift": f"{response}{on} has moved away from its earlier level",
        "serial": f"runs of {response}{on} resemble the runs just before them",
        "batch": f"{response} depends on the {along or 'level'} a run was made on{_most(finding)}",
        "spread": f"the scatter of {response}{on} is no longer what it was",
        "clock": f"{response} goes up and down with the time of day or week",
        "lineage": f"{response} of restarted runs resembles that of their parents",
    }
    return sentences[finding.kind]


def _in_cells(finding: Finding) -> str:
    """Say in which cells, where not all of them are touched."""
    if not finding.cells:
        return ""
    more = f" and {len(finding.cells) - N_CELLS_TOLD} more" if len(finding.cells) > N_CELLS_TOLD else ""
    return f" in {', '.join(finding.cells[:N_CELLS_TOLD])}{more}"


def _on(finding: Finding) -> str:
    if finding.along in {None, "order"}:
        return ""
    return (
        f" on {finding.along} {finding.level}"
        if finding.level is not None
        else f" within each {finding.along}"
    )


def _most(finding: Finding) -> str:
    return f", most of all on {finding.along} {finding.level}" if finding.level is not None else ""


def _amount(effect: Effect | None, confidence: float, unit: str | None) -> str:
    if effect is None:
        return ""
    measured = f" {unit}" if unit else ""
    text = f": {effect.name} {_figure(effect.value)}{measured}"
    if effect.low is None or effect.high is None:
        return f"{text} (too few runs for an interval)"
    return f"{text} ({confidence:.0%} interval {_figure(effect.low)} to {_figure(effect.high)})"


def _figure(value: float) -> str:
    return f"{value:.3g}".replace("-", "−")


def _since(finding: Finding, dated: Dated | None) -> str:
    if dated is None or dated.first_after is None:
        return f", seen at {finding.run}" if finding.run else ""
    first = dated.first_after
    if dated.gap and dated.last_before is not None:
        return f", at a date unknown between {when(dated.last_before)} and {when(first)}"
    return f", since {when(first)}{_range(dated.earliest, dated.latest)}"


def _range(earliest: Moment | None, latest: Moment | None) -> str:
    if earliest is None or latest is None or earliest.position == latest.position:
        return ""
    return f" (it may have begun anywhere from {earliest.run} to {latest.run})"
