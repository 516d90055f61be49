"""Warnings: one cause is one, ids are stable, grades rise with one alert, and what is over is withdrawn."""

import msgspec
import pytest
from campaigns_made import PLAN, append, lay_out, records
from sqlalchemy import select

from auditd.pipeline.auditing import Audit
from auditd.pipeline.campaign import open_for_taking
from auditd.pipeline.gathering import gather
from auditd.pipeline.raising import Raiser, finding_of, key_of
from auditd.pipeline.tracks import Raised
from auditd.plan_reading import parse_plan
from auditd.records import Finding
from auditd.sequential import Alarm
from auditd.series.load import load_table
from auditd.store.cautions import stored_cautions
from auditd.store.runs import count_runs
from auditd.store.tables import outbox

ALERTS = '\n[[alerts]]\nto = "command"\nargv = ["tell"]\ngrades = ["note", "material", "severe"]\n'


@pytest.fixture(scope="module")
def gathered(tmp_path_factory):
    """200 clean runs in a store, and the bytes of it."""
    folder = tmp_path_factory.mktemp("raising")
    plan = lay_out(folder, PLAN + ALERTS)
    append(folder, records(200))
    gather(plan, lambda _step, _totals: None)
    return plan


@pytest.fixture
def raising(gathered):
    """A connection to the store whose changes are undone, and a raiser on it."""
    campaign = open_for_taking(gathered)
    with campaign.engine.connect() as connection:
        begun = connection.begin()
        yield connection, Raiser(campaign.plan, connection), campaign.plan
        begun.rollback()


def alarm(
    kind="drift", along="host", *, index=100, part="", epoch=1, level="h2", response="energy", **fields
):
    found = Alarm(
        kind=kind, along=along, index=index, log_e=8.0, lead=True, threshold=7.0, level=level, **fields
    )
    return Raised(
        response=response,
        part=part,
        epoch=epoch,
        alarm=found,
        index=index,
        since=80,
        since_low=70,
        since_high=90,
    )


def fact(key="repeat:cell:x", *, share=0.01, holds=True, message="repeated"):
    return Finding(
        key=key,
        kind="repeat",
        message=message,
        run="r00050",
        index=50,
        n=51,
        share=share,
        n_again=1,
        holds=holds,
    )


def letters(connection):
    return [(row.caution, row.body) for row in connection.execute(select(outbox).order_by(outbox.c.row))]


def regraded(connection, raiser, plan):
    audit = Audit(plan, connection, count_runs(connection).next_position)
    raiser.regrade(connection, load_table(connection, plan), audit)
    return stored_cautions(connection)


def test_one_condition_is_one_warning_and_one_alert(raising):
    """The same alarm twice, or a fact told again, raises and alerts once."""
    connection, raiser, _ = raising
    assert raiser.raise_alarms(connection, [alarm()]) == 1
    assert raiser.raise_alarms(connection, [alarm()]) == 0
    assert raiser.raise_facts(connection, [fact(), fact()]) == 1
    assert [one.id for one in stored_cautions(connection)] == ["W1", "W2"]
    assert len(letters(connection)) == 2


def test_what_a_standing_cause_explains_is_listed_under_it(raising):
    """The resemblance of the host's runs is the same fault; another host's drift is another."""
    connection, raiser, _ = raising
    raiser.raise_alarms(connection, [alarm(), alarm("serial"), alarm("serial", "order", level=None)])
    raiser.raise_alarms(connection, [alarm("drift", "host", level="h3", epoch=1, response="steps")])
    first, second = stored_cautions(connection)
    assert [(one.kind, one.along) for one in first.finding.explains] == [
        ("serial", "host"),
        ("serial", "order"),
    ]
    assert (second.finding.response, second.finding.explains) == ("steps", ())


@pytest.mark.parametrize("link", ["under", "replaces"])
def test_an_alarm_that_names_its_leader_goes_under_it(raising, link):
    """The audit itself says what it belongs to, whatever the rules of causes would say."""
    connection, raiser, _ = raising
    raiser.raise_alarms(connection, [alarm("serial", "order", level=None)])
    assert raiser.raise_alarms(connection, [alarm("spread", "host", **{link: ("serial", "order")})]) == 0
    (one,) = stored_cautions(connection)
    assert [(other.kind, other.level) for other in one.finding.explains] == [("spread", "h2")]
    assert one.finding.key == "audit:1:energy::serial:order"


def test_a_warning_never_lists_itself(raising):
    """A family that alarms again under its own warning is not told twice."""
    connection, raiser, _ = raising
    raiser.raise_alarms(
        connection, [alarm(), alarm("serial"), alarm("drift", "host", under=("serial", "host"))]
    )
    (one,) = stored_cautions(connection)
    assert ("drift", "host", "h2") not in [(o.kind, o.along, o.level) for o in one.finding.explains]


def test_a_warning_that_is_renamed_does_not_list_its_new_name(raising):
    """When later runs give it the name of something listed, that is listed no more."""
    connection, raiser, _ = raising
    raiser.raise_alarms(connection, [alarm("serial"), alarm("drift", "host", under=("serial", "host"))])
    (one,) = stored_cautions(connection)
    renamed = msgspec.structs.replace(one.finding, kind="drift")
    raiser._store(connection, msgspec.structs.replace(one, finding=renamed))
    assert stored_cautions(connection)[0].finding.explains == ()


def test_epochs_and_parts_are_conditions_of_their_own(raising):
    """After a repair the same fault is a new warning; so is the other series of seed blocks."""
    connection, raiser, _ = raising
    raiser.raise_alarms(connection, [alarm(), alarm(epoch=2)])
    assert len(stored_cautions(connection)) == 2
    keys = {key_of(alarm(epoch=e, part=p), "drift", "host") for e in (1, 2) for p in ("", "block means")}
    assert len(keys) == 4


def test_a_fact_that_grows_rises_in_grade_and_alerts_once_more(raising):
    """From a hundredth of the runs to sixty hundredths: note to severe, one more letter; never down again."""
    connection, raiser, plan = raising
    raiser.raise_facts(connection, [fact()])
    for share, grade, n_letters in ((0.6, "severe", 2), (0.7, "severe", 2), (0.02, "severe", 2)):
        raiser.raise_facts(connection, [fact(share=share, message=f"share {share}")])
        (one,) = regraded(connection, raiser, plan)
        assert (one.id, one.grade, one.finding.message) == ("W1", grade, f"share {share}")
        assert len(letters(connection)) == n_letters


def test_a_fact_that_holds_no_longer_is_withdrawn_and_stands_again(raising):
    """Withdrawn when it is no longer so; standing under the same id when it is so again."""
    connection, raiser, plan = raising
    raiser.raise_facts(connection, [fact()])
    states = []
    for holds in (False, True):
        raiser.raise_facts(connection, [fact(holds=holds)])
        states += [(one.id, one.state) for one in regraded(connection, raiser, plan)]
    assert states == [("W1", "withdrawn"), ("W1", "standing")]


def test_what_never_held_is_no_warning(raising):
    """A finding that says that all is well raises nothing."""
    connection, raiser, _ = raising
    assert raiser.raise_facts(connection, [fact(holds=False)]) == 0
    assert stored_cautions(connection) == []


def test_a_fact_that_grew_is_renewed_after_a_restart(raising):
    """A process that ended before the next weighing loses nothing: what is replayed renews the warning."""
    connection, raiser, plan = raising
    raiser.raise_facts(connection, [fact()])
    again = Raiser(plan, connection)
    assert again.raise_missing(connection, [fact(), fact(share=0.6, message="all of 60 runs")]) == 0
    (one,) = regraded(connection, again, plan)
    assert (one.finding.message, one.grade) == ("all of 60 runs", "severe")
    assert len(letters(connection)) == 2


def test_what_is_listed_stays_listed_after_a_restart(raising):
    """A raiser made anew from the store answers as the old one did: same leader, nothing raised twice."""
    connection, raiser, plan = raising
    raiser.raise_alarms(
        connection, [alarm("serial", "order", level=None), alarm("drift", "host", under=("serial", "order"))]
    )
    for one in (raiser, Raiser(plan, connection)):
        assert one.raise_alarms(connection, [alarm("batch", "host", under=("drift", "host"))]) == 0
        (kept,) = stored_cautions(connection)
        assert ("batch", "host") in [(o.kind, o.along) for o in kept.finding.explains]


def test_withdrawing_a_kind_leaves_others(raising):
    """`silence` ends when runs land again; a fault does not."""
    connection, raiser, _ = raising
    silent = Finding(key="silence:1", kind="silence", message="nothing", n=200)
    raiser.raise_facts(connection, [silent, fact()])
    raiser.withdraw(connection, "silence", "runs land again")
    assert [(one.finding.kind, one.state) for one in stored_cautions(connection)] == [
        ("silence", "withdrawn"),
        ("repeat", "standing"),
    ]


def test_a_finding_names_the_run_at_its_place(raising):
    """Index and dates are places of the campaign, and the run is the one that stands there."""
    connection, _, plan = raising
    one = finding_of(alarm(index=123), load_table(connection, plan), plan)
    assert (one.run, one.index, one.since, one.since_low, one.since_high) == ("r00123", 123, 80, 70, 90)
    assert one.effect is not None
    assert one.effect.low < one.effect.value < one.effect.high


def test_alerts_go_to_targets_of_the_grade_only(gathered):
    """A note is not told where only severe ones are wanted."""
    campaign = open_for_taking(gathered)
    plan = parse_plan((PLAN + ALERTS).replace('"note", "material", ', ""), gathered)
    with campaign.engine.connect() as connection:
        begun = connection.begin()
        Raiser(plan, connection).raise_facts(connection, [fact(), fact("repeat:cell:y", share=0.9)])
        assert [number for number, _ in letters(connection)] == [2]
        begun.rollback()
