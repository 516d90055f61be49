"""Seeded campaigns with known truth, for rehearsal, the demo and the tests."""

from auditd.simulate.campaign import simulate
from auditd.simulate.effects import (
    Autoregressive,
    CachedResults,
    DailyCycle,
    Drift,
    Effect,
    Failures,
    IgnoredSeed,
    LevelEffects,
    LevelShift,
    RestartLineage,
    SeedBlocks,
    SpreadChange,
    Step,
)
from auditd.simulate.laws import LAWS
from auditd.simulate.layouts import blocked_layout, sequential_layout, sweep_layout
from auditd.simulate.simulated import Layout, Planted, Simulated

__all__ = [
    "LAWS",
    "Autoregressive",
    "CachedResults",
    "DailyCycle",
    "Drift",
    "Effect",
    "Failures",
    "IgnoredSeed",
    "Layout",
    "LevelEffects",
    "LevelShift",
    "Planted",
    "RestartLineage",
    "SeedBlocks",
    "Simulated",
    "SpreadChange",
    "Step",
    "blocked_layout",
    "sequential_layout",
    "simulate",
    "sweep_layout",
]
