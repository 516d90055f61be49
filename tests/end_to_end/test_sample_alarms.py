"""The sequential audit names the planted faults first, whatever its key; the clean twin raises nothing."""

import numpy as np
import pytest

from auditd.sequential import replay
from auditd.simulate.sample_campaign import RESPONSES, sample_campaign, time_text

N_KEYS = 8
FIRST_EPOCH = 0.05 * 6 / np.pi**2
BUDGETS = {
    **dict.fromkeys(RESPONSES, (0.8 * FIRST_EPOCH, 3)),
    "duration": (0.1 * FIRST_EPOCH, 2),
    "completed": (0.1 * FIRST_EPOCH, 2),
}
"""Alarm budget of the first epoch, and responses that share it: eight tenths for the plan's, one for the two
that are added, one for facts."""


def audited(edition, response, key):
    campaign = sample_campaign(edition)
    records = campaign.records
    starts = np.array(
        [np.datetime64(record["started"].removesuffix("Z"), "ms").astype(float) / 1000 for record in records]
    )
    completed = np.array([record["status"] == "ok" for record in records])
    series = {name: np.array([record.get(name, np.nan) for record in records]) for name in RESPONSES}
    series["duration"] = np.where(completed, campaign.finished - starts, np.nan)
    series["completed"] = completed.astype(float)
    kept = np.flatnonzero(completed | (response == "completed"))
    cells = np.array([f"{record['anchor']} {record['mesh']}" for record in records])
    nuisance = {name: np.array([record[name] for record in records])[kept] for name in ("host", "build")}
    budget, n_responses = BUDGETS[response]
    audit = replay(
        series[response][kept],
        cells=cells[kept],
        nuisance=nuisance,
        times=starts[kept],
        ids=[records[i]["run"] for i in kept],
        alarm_budget=budget,
        n_responses=n_responses,
        key=bytes([key]),
        response=response,
    )
    return campaign, audit, kept


@pytest.mark.parametrize("response", BUDGETS)
def test_clean_twin_raises_nothing(response):
    for key in range(N_KEYS):
        assert audited("clean", response, key)[1].alarms == []


@pytest.mark.parametrize("response", ["fatigue", "duration"])
def test_responses_without_a_fault_stay_silent_in_the_faulty_edition(response):
    for key in range(N_KEYS):
        assert audited("faulty", response, key)[1].alarms == []


@pytest.mark.parametrize(("response", "within"), [("peak_tension", 550), ("offset", 150), ("completed", 40)])
def test_first_alarm_names_the_planted_fault_soon_after_it_began(response, within):
    for key in range(N_KEYS):
        campaign, audit, kept = audited("faulty", response, key)
        fault = next(fault for fault in campaign.faults if fault.response == response)
        first = audit.alarms[0]
        assert first.lead
        assert first.kind in fault.kinds
        assert fault.along in {None, first.along}
        assert fault.level in {None, first.level}
        assert fault.index <= kept[first.index] <= fault.index + within


def test_times_are_written_as_rfc_3339_in_utc():
    """RFC 3339, section 5.8: 1937-01-01T12:00:27.87+00:20 is 11:40:27.87Z."""
    assert time_text(-1041337172.13) == "1937-01-01T11:40:27.870Z"
