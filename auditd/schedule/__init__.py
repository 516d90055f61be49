"""Run orders that protect a comparison, and what a plan would find and decide if it were carried out."""

from auditd.schedule.efficiency import efficiency_factor
from auditd.schedule.power import would_see
from auditd.schedule.randomised_blocks import Schedule, ScheduledRun, randomised_blocks
from auditd.schedule.rehearsal import Rehearsal, rehearse
from auditd.schedule.remaining import LandedRun, rest
from auditd.schedule.scenarios import DEFAULT_SCENARIOS, Scenario, scenario_named
from auditd.schedule.written import schedule_csv, schedule_document

__all__ = [
    "DEFAULT_SCENARIOS",
    "LandedRun",
    "Rehearsal",
    "Scenario",
    "Schedule",
    "ScheduledRun",
    "efficiency_factor",
    "randomised_blocks",
    "rehearse",
    "rest",
    "scenario_named",
    "schedule_csv",
    "schedule_document",
    "would_see",
]
