"""The operator's word: what does not fit is refused whole, what fits applies from the next run on."""

import pytest
from campaigns_made import PLAN, append, lay_out, records

from auditd.errors import BadInput, PlanError
from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.gathering import gather
from auditd.pipeline.replying import amend, apply_answers, reply
from auditd.store.answers import stored_answers
from auditd.store.cautions import stored_cautions
from auditd.store.plans import plan_versions, stored_epochs
from auditd.store.runs import count_runs


def campaign_in(folder, n=60):
    plan = lay_out(folder)
    made = records(n)
    made[5]["seed"] = made[4]["seed"]
    append(folder, made)
    gather(plan, lambda _step, _totals: None)
    return plan


@pytest.fixture(scope="module")
def seeded(tmp_path_factory):
    """A campaign whose only warning, W1, is of a seed used twice."""
    return campaign_in(tmp_path_factory.mktemp("seeded"))


def kept(plan):
    with open_for_queries(plan).engine.connect() as connection:
        return (
            [(a.action, a.scope, a.from_position) for a in stored_answers(connection)],
            [one.state for one in stored_cautions(connection)],
            [(e.from_position, e.scope) for e in stored_epochs(connection)],
            len(plan_versions(connection)),
        )


@pytest.mark.parametrize(
    ("name", "reason", "action", "scope", "words"),
    [
        ("W9", "why", "noted", {}, "no warning 'W9'"),
        ("x", "why", "noted", {}, "no warning 'x'"),
        ("W1", "  ", "noted", {}, "needs a reason"),
        ("W1", "why", "set-aside", {}, "needs what is set aside"),
        ("W1", "why", "set-aside", {"rack": "3"}, "known: host"),
        ("W1", "why", "set-aside", {"host": "h9"}, "levels: h1, h2, h3, h4"),
        ("W1", "why", "set-aside", {"from": "garbage"}, "neither a run nor a time"),
        ("W1", "why", "set-aside", {"host": "h1", "to": "2027-13-01"}, "neither a run nor a time"),
        ("W1", "why", "restart", {"host": "H1"}, "levels: h1"),
        ("W1", "why", "absorb", {}, "W1 is a seed"),
    ],
)
def test_what_does_not_fit_is_refused_and_nothing_is_kept(seeded, name, reason, action, scope, words):
    """Neither the answer nor the warning's state is half changed, and the message says what fits."""
    before = kept(seeded)
    with pytest.raises(BadInput, match=words):
        reply(seeded, name, reason, action, scope)
    assert kept(seeded) == before


def test_an_answer_applies_once_from_the_next_run_on(tmp_path):
    """A restart opens one epoch at the next place; asking whether there is one changes nothing."""
    plan = campaign_in(tmp_path)
    reply(plan, "w1", "generator replaced", "restart", {"host": "h1"})
    assert kept(plan)[:3] == ([("restart", {"host": "h1"}, None)], ["answered"], [(0, {})])
    append(tmp_path, [r | {"id": f"x{k}"} for k, r in enumerate(records(120, seed=9)[60:])])
    gather(plan, lambda _step, _totals: None)
    answers, _, epochs, _ = kept(plan)
    assert answers == [("restart", {"host": "h1"}, 60)]
    assert epochs == [(0, {}), (60, {"host": "h1"})]
    gather(plan, lambda _step, _totals: None)
    assert kept(plan)[2] == epochs


def test_only_asking_changes_nothing(tmp_path):
    """Whether replies wait is told without putting them into force."""
    plan = campaign_in(tmp_path)
    reply(plan, "W1", "known", "noted", {})
    with open_for_queries(plan).engine.connect() as connection:
        campaign = open_for_queries(plan)
        assert apply_answers(connection, campaign.plan, 60, only_ask=True)
        assert stored_answers(connection)[0].from_position is None


def test_bounds_are_kept_as_runs_or_utc_times(tmp_path):
    """A time without an offset is UTC, one with an offset is turned into it; a run stays a run."""
    plan = campaign_in(tmp_path)
    scope = {"from": "2027-03-01T05:00:00+02:00", "to": "r00040"}
    reply(plan, "W1", "power cut", "set-aside", scope)
    reply(plan, "W1", "power cut", "set-aside", {"from": "2027-03-01"})
    first, second = (scope for _, scope, _ in kept(plan)[0])
    assert first == {"from": "2027-03-01T03:00:00Z", "to": "r00040"}
    assert second == {"from": "2027-03-01T00:00:00Z"}


def test_an_amendment_is_a_version_an_epoch_and_a_warning(tmp_path):
    """What differs is told, and the same plan cannot be amended twice."""
    plan = campaign_in(tmp_path)
    with pytest.raises(PlanError, match="nothing to amend"):
        amend(plan, "why")
    plan.write_text(PLAN.replace("margin = 0.2", "margin = 0.3"))
    with pytest.raises(BadInput, match="needs a reason"):
        amend(plan, " ")
    assert amend(plan, "wrong unit") == ["responses.energy.margin: 0.2 -> 0.3"]
    assert kept(plan)[1:] == (["standing", "standing"], [(0, {}), (60, {})], 2)
    with pytest.raises(PlanError, match="nothing to amend"):
        amend(plan, "again")


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('scheme = "/cfg/scheme"', 'scheme = "/cfg/scheme"\nmesh = "/cfg/mesh"', "factors.mesh is new"),
        ('by = "started"', 'by = "arrival"', "order of runs"),
    ],
)
def test_amendments_that_contradict_stored_runs_are_refused_whole(tmp_path, old, new, words):
    """No version, epoch or warning is left behind."""
    plan = campaign_in(tmp_path)
    before = kept(plan)
    plan.write_text(PLAN.replace(old, new))
    with pytest.raises(PlanError, match=words):
        amend(plan, "why")
    assert kept(plan) == before


def test_nothing_can_be_amended_before_the_first_run(tmp_path):
    """Before any run the plan changes freely, and says so."""
    plan = lay_out(tmp_path)
    gather(plan, lambda _step, _totals: None)
    plan.write_text(PLAN.replace("margin = 0.2", "margin = 0.3"))
    gather(plan, lambda _step, _totals: None)
    with open_for_queries(plan).engine.connect() as connection:
        assert count_runs(connection).n == 0
        assert "margin = 0.3" in plan_versions(connection)[-1].text
