"""Three short days beside the real daemon: memory and descriptors flat, little processor time."""

from itertools import pairwise

import pytest
from soak import soak

pytestmark = [pytest.mark.slow, pytest.mark.timeout(300)]

N_A_DAY = 3_000
MEMORY_GROWTH = 1.1
"""Resident memory at the end over that after the first day, at most."""
CPU_MAX_S = 600.0 * N_A_DAY / 10_000
"""Ten minutes of processor for a day of 10,000 runs."""


def test_three_days_leave_memory_and_descriptors_flat(tmp_path):
    """Resident memory, open descriptors and processor time after each of three days of 3,000 runs."""
    days = soak(tmp_path / "campaign", 3, N_A_DAY, say=lambda *_, **__: None)
    assert [day["runs"] for day in days] == [N_A_DAY, 2 * N_A_DAY, 3 * N_A_DAY]
    assert days[-1]["rss_mib"] <= MEMORY_GROWTH * days[0]["rss_mib"], days
    assert len({day["descriptors"] for day in days}) == 1, days
    spent = [after["cpu_s"] - before["cpu_s"] for before, after in pairwise(days)]
    assert max(spent) < CPU_MAX_S, days
