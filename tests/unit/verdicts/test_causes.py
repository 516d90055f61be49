"""One cause is one warning."""

import itertools

import pytest

from auditd.records import Finding
from auditd.verdicts.causes import RULES, group, why_explained
from auditd.verdicts.moments import Change


def _build_change(moment, position=412, within=None):
    return Change(nuisance="build", level="b2", moment=moment(position), within=within)


def test_a_step_on_one_host_explains_its_serial_and_the_batch(make_finding):
    """Serial within the host, the hosts' ICC and the drift of the whole order are listed under it."""
    step = make_finding(log_e=12.0)
    others = [
        make_finding("serial", log_e=8.0),
        make_finding("batch", level=None, log_e=7.5),
        make_finding("drift", along="order", level=None, log_e=7.1),
        make_finding("spread", along="order", level=None, log_e=7.0),
    ]
    (one,) = group([others[0], step, *others[1:]])
    assert one.leading.key == step.key
    assert [(listed.kind, listed.along) for listed in one.leading.explains] == [
        ("serial", "host"), ("batch", "host"), ("drift", "order"), ("spread", "order"),
    ]  # fmt: skip
    assert len(one.explained) == len(one.reasons) == 4


def test_another_host_is_another_cause(make_finding):
    """Two hosts that drift are two warnings."""
    assert len(group([make_finding(log_e=12.0), make_finding(level="n5", log_e=9.0)])) == 2


def test_another_response_is_another_cause_unless_it_is_automatic(make_finding):
    """`drag` stands by itself; `duration` is listed under the response that it goes with."""
    found = group([make_finding(log_e=12.0), make_finding(response="drag", log_e=9.0, key="x")])
    assert len(found) == 2
    found = group([make_finding(log_e=12.0), make_finding(response="duration", log_e=9.0, key="x")])
    assert len(found) == 1


def test_nothing_is_explained_that_began_before_its_cause(make_finding):
    """A serial dependence from run 20 to 40 on is not due to a step at run 205 or later."""
    early = make_finding("serial", since=30, since_low=20, since_high=40, log_e=8.0)
    assert len(group([make_finding(log_e=12.0), early])) == 2
    near = make_finding("serial", since=150, since_low=100, since_high=160, log_e=8.0)
    assert len(group([make_finding(log_e=12.0), near])) == 1


def test_a_build_change_explains_the_drift_that_starts_with_it(make_finding, moment):
    """Drift along the order from the run at which build b2 first ran; one that starts elsewhere stays."""
    batch = make_finding(
        "batch", along="build", level="b2", log_e=20.0, since=412, since_low=400, since_high=430
    )
    drift = make_finding(
        "drift", along="order", level=None, log_e=9.0, since=413, since_low=405, since_high=425
    )
    elsewhere = make_finding(
        "drift", along="order", level=None, log_e=9.0, since=700, since_low=690, since_high=710
    )
    changes = [_build_change(moment)]
    assert why_explained(batch, drift, changes)
    assert len(group([batch, drift], changes)) == 1
    serial_by_build = Finding(key="k", kind="serial", message="", along="host", level="n2", response="lift")
    assert why_explained(batch, serial_by_build, changes) is None
    assert why_explained(elsewhere, batch, changes) is None


def test_a_cycle_leads_what_follows_it(make_finding):
    """Clock leads, though the slow signal that followed the cycle has the larger e-value."""
    drift = make_finding("drift", along="order", level=None, log_e=30.0)
    clock = make_finding("clock", along="order", level=None, log_e=9.0)
    (one,) = group([drift, clock])
    assert one.leading.kind == "clock"


def test_a_spell_of_failures_explains_its_traces_in_completed(make_finding):
    """The response `completed`, and the host on which the spell was."""
    spell = Finding(key="failure:order", kind="failure", message="…", along="order", n=400, log_e=20.0)
    by_host = Finding(
        key="failure:host", kind="failure", message="…", along="host", level="n1", n=400, log_e=9.0
    )
    traces = [make_finding("drift", along="order", level=None, response="completed"), by_host]
    (one,) = group([*traces, spell])
    assert one.leading.key == "failure:order"
    assert len(group([spell, make_finding("drift", response="lift")])) == 2


def test_a_factor_bound_to_a_host_explains_the_build_it_met_there():
    """mesh=fine ran on teal only, and so met teal's build only."""
    host = Finding(key="a", kind="confound", message="", along="host", level="teal", cells=("mesh=fine",))
    build = Finding(key="b", kind="confound", message="", along="build", level="b41", cells=("mesh=fine",))
    other = Finding(key="c", kind="confound", message="", along="build", level="b41", cells=("solver=a",))
    groups = group([host, build, other])
    assert [one.leading.key for one in groups] == ["a", "c"]


def test_withdrawn_findings_stand_alone(make_finding):
    """What no longer holds neither explains nor is explained."""
    gone = make_finding("serial", holds=False)
    assert len(group([make_finding(log_e=12.0), gone])) == 2


def test_every_finding_is_in_one_group_once_whatever_the_order(make_finding):
    """Nothing is lost or told twice, and the leaders do not depend on the order of findings."""
    findings = [
        make_finding(log_e=12.0),
        make_finding("serial", log_e=8.0),
        make_finding("batch", level=None, log_e=7.5),
        make_finding("drift", level="n5", log_e=6.9),
        make_finding("clock", along="order", level=None, response="drag", log_e=7.7),
    ]
    leaders = set()
    for order in itertools.permutations(findings):
        groups = group(order)
        keys = [one.leading.key for one in groups] + [other.key for one in groups for other in one.explained]
        assert sorted(keys) == sorted(finding.key for finding in findings)
        leaders.add(tuple(sorted(one.leading.key for one in groups)))
    assert len(leaders) == 1


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: f"{'/'.join(rule.cause)} {rule.place}")
def test_every_rule_gives_its_reason_and_can_apply(rule, make_finding, moment):
    """For each row of the table there is a pair of findings that it, or one above it, explains."""
    response = {"completed": "completed"}.get(rule.on, "lift")
    along = {"start": ("build", "b2"), "order": ("host", "n3")}.get(rule.place, ("host", "n3"))
    when = {"since": 412, "since_low": 400, "since_high": 420}
    cause = make_finding(rule.cause[0], *along, key="cause", cells=("solver=a",), **when)
    effect_along = ("order", None) if rule.place in {"order", "start"} else ("host", "n3")
    effect = make_finding(
        rule.effect[0], *effect_along, key="effect", response=response, cells=("solver=a",), **when
    )
    assert why_explained(cause, effect, [_build_change(moment)])
    assert len(rule.reason) > 20
