"""The registry of what is asked of a response: the bets, the families and the orders, in one place."""

from __future__ import annotations

from auditd.sequential.bets_batch import BatchEffects
from auditd.sequential.bets_clock import ClockCycle
from auditd.sequential.bets_lineage import ParentCorrelation
from auditd.sequential.bets_signal import WITHIN_LEVELS, SignalAlongOrder, SignalWithinLevels
from auditd.sequential.bets_spread import SpreadChange
from auditd.sequential.options import Options
from auditd.sequential.scored_block import Bets


def bets_asked(options: Options) -> tuple[Bets, ...]:
    """Give the bets that can be made under these options, in a fixed order."""
    signals = tuple(kind for kind in ("serial", "drift") if kind not in options.withheld)
    bets: list[Bets] = [SignalAlongOrder(signals)] if signals else []
    bets.append(SpreadChange())
    if options.has_times:
        bets.append(ClockCycle())
    if options.has_parents:
        bets.append(ParentCorrelation())
    for name in options.nuisances:
        bets += [SignalWithinLevels(name, signals)] if signals else []
        bets.append(BatchEffects(name))
    return tuple(bet for bet in bets if bet.families[0][0] not in options.withheld)


def fresh_bets(kind: str, along: str, *, within_one_level: bool) -> Bets:
    """Give one family's bets without a past; within one level a signal follows that level's own order."""
    if kind in WITHIN_LEVELS:
        return SignalAlongOrder((kind,), WITHIN_LEVELS if within_one_level else None)
    if kind == "batch":
        return BatchEffects(along)
    if kind == "clock":
        return ClockCycle()
    return ParentCorrelation() if kind == "lineage" else SpreadChange()
