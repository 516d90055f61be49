"""Seeded campaigns with known truth, for rehearsal, the demo and the tests."""

from auditd.simulate.campaign import simulate
from auditd.simulate.effects import (
    Autoregressive,
    BatchEffects,
    CachedResults,
    DailyCycle,
    Drift,
    Failures,
    Fault,
    IgnoredSeed,
    LevelShift,
    RestartLineage,
    SeedBlocks,
    SpreadJump,
    StepShift,
)
from auditd.simulate.laws import LAWS
from auditd.simulate.layouts import blocked_layout, sequential_layout, sweep_layout
from auditd.simulate.simulated import Layout, PlantedFault, Simulated

__all__ = [
    "LAWS",
    "Autoregressive",
    "BatchEffects",
    "CachedResults",
    "DailyCycle",
    "Drift",
    "Failures",
    "Fault",
    "IgnoredSeed",
    "Layout",
    "LevelShift",
    "PlantedFault",
    "RestartLineage",
    "SeedBlocks",
    "Simulated",
    "SpreadJump",
    "StepShift",
    "blocked_layout",
    "sequential_layout",
    "simulate",
    "sweep_layout",
]
