"""The sequential audit: scores, bets, wealth and alarms over arrays, valid however often one looks."""

from auditd.sequential.advance import Advanced, EarlierRuns
from auditd.sequential.alarm import Alarm, Explained
from auditd.sequential.auditor import Auditor
from auditd.sequential.effect import Effect
from auditd.sequential.options import Options
from auditd.sequential.replay import Replay, replay
from auditd.sequential.seed_blocks import SeedBlockBuilder, SeedBlocks, seed_blocks
from auditd.sequential.stages import cells_within_stages

__all__ = [
    "Advanced",
    "Alarm",
    "Auditor",
    "EarlierRuns",
    "Effect",
    "Explained",
    "Options",
    "Replay",
    "SeedBlockBuilder",
    "SeedBlocks",
    "cells_within_stages",
    "replay",
    "seed_blocks",
]
