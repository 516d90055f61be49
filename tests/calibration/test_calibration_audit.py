"""The full audit finds dependence in exchangeable campaigns as seldom as it says, under any law."""

import pytest
from audit_campaigns import LAWS, SETTINGS, found_anything
from scipy.stats import binom

LEVEL = 0.05
N_CAMPAIGNS = {"4 cells, 4 hosts, n = 400, random order": 200}
N_OTHERS = 100
MISS = 0.001
"""Probability with which a correct audit would fail one of the nine tests."""


@pytest.mark.slow
@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("setting", SETTINGS)
def test_exchangeable_campaigns_are_seldom_called_dependent(setting, law):
    """Any Holm-adjusted p-value about dependence is below 0.05 in no more campaigns than 5 % and chance."""
    n = N_CAMPAIGNS.get(setting, N_OTHERS)
    n_found = sum(bool(found_anything(setting, law, number)) for number in range(n))
    assert n_found <= binom.isf(MISS, n, LEVEL)
