"""The sequential audit: scores, bets, wealth and alarms over arrays, valid however often one looks."""

from auditd.sequential.alarm import Alarm, Explained
from auditd.sequential.auditor import Advanced, Auditor, EarlierRuns
from auditd.sequential.options import Options
from auditd.sequential.replay import Replay, replay

__all__ = ["Advanced", "Alarm", "Auditor", "EarlierRuns", "Explained", "Options", "Replay", "replay"]
