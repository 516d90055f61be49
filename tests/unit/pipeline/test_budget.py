"""The alarm budget is shared so that nothing spends more than the campaign has."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.pipeline.budget import epoch_budget, shares
from auditd.plan_reading import parse_plan

BARE = '[responses.y]\nat = "y"\n'
TIMED = '[record]\nstarted = "s"\nfinished = "f"\nstatus = "t"\n' + BARE


@pytest.mark.parametrize("text", [BARE, TIMED])
@pytest.mark.parametrize("budget", [0.001, 0.05, 0.5])
def test_shares_add_up_to_the_campaigns_budget(text, budget):
    """Responses, automatic responses and facts together spend the budget, no more and no less."""
    parts = shares(parse_plan(f"[campaign]\nalarm_budget = {budget}\n" + text))
    assert parts.responses + parts.added + parts.facts == pytest.approx(budget, rel=1e-12)
    assert (parts.added > 0) == (text is TIMED)


def test_automatic_responses_get_a_tenth():
    """`duration` and `completed` together get a tenth (design), and so do the facts that count."""
    parts = shares(parse_plan("[campaign]\nalarm_budget = 0.05\n" + TIMED))
    assert parts.added == pytest.approx(0.005)
    assert parts.facts == pytest.approx(0.005)


@given(share=st.floats(1e-6, 0.5), n=st.integers(1, 3000))
def test_any_number_of_epochs_spends_at_most_the_share(share, n):
    """The sum of 1/e² is π²/6 (Euler 1735), so that epochs without end spend the share."""
    spent = math.fsum(epoch_budget(share, epoch) for epoch in range(1, n + 1))
    assert spent <= share * (1 + 1e-12)
    assert spent >= share * (1 - 6 / (math.pi**2 * n)) * (1 - 1e-12)
