"""The registry of families: what is asked of a response, in one list."""

from __future__ import annotations

from auditd.sequential.family_batch import BatchEffects
from auditd.sequential.family_clock import ClockCycle
from auditd.sequential.family_lineage import ParentCorrelation
from auditd.sequential.family_signal import SignalAlongOrder
from auditd.sequential.family_signal_levels import SignalWithinLevels
from auditd.sequential.family_spread import SpreadChange
from auditd.sequential.grids import DRIFT_PHI_LEVEL, DRIFT_PHI_ORDER, DRIFT_SHARE, SERIAL_PHI, SERIAL_SHARE
from auditd.sequential.latent_ar1 import gain_table
from auditd.sequential.options import Options
from auditd.sequential.scored_block import Family


def families_asked(options: Options) -> tuple[Family, ...]:
    """Give the families that can be asked under these options, in a fixed order."""
    serial = gain_table(SERIAL_PHI, SERIAL_SHARE)
    families: list[Family] = [
        SignalAlongOrder("serial", serial),
        SignalAlongOrder("drift", gain_table(DRIFT_PHI_ORDER, DRIFT_SHARE)),
        SpreadChange(),
    ]
    if options.has_times:
        families.append(ClockCycle())
    if options.has_parents:
        families.append(ParentCorrelation())
    for name in options.nuisances:
        families += [
            SignalWithinLevels("serial", name, serial),
            SignalWithinLevels("drift", name, gain_table(DRIFT_PHI_LEVEL, DRIFT_SHARE)),
            BatchEffects(name),
        ]
    return tuple(family for family in families if family.kind not in options.withheld)


def fresh_family(kind: str, along: str, level: str | None) -> Family:
    """Give a family without a past, to weigh starts; within one level a signal follows that level's order."""
    if kind == "serial" and (along == "order" or level is not None):
        return SignalAlongOrder(kind, gain_table(SERIAL_PHI, SERIAL_SHARE))
    if kind == "batch":
        return BatchEffects(along)
    return ClockCycle() if kind == "clock" else ParentCorrelation()
