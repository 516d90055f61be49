"""Findings made into warnings."""

import datetime as dt

from auditd.verdicts.cautions import Consequence, caution
from auditd.verdicts.moments import Change, Dated

NOW = dt.datetime(2026, 5, 12, 15, tzinfo=dt.UTC)


def test_a_warning_has_sentence_cause_loss_and_remedy(make_finding, plan, moment):
    """All parts meet in one record."""
    made = caution(
        make_finding(along="order", level=None, since=413, since_low=405, since_high=425, n=2000),
        plan,
        number=7,
        grade="material",
        raised_at=NOW,
        consequence=Consequence(loss=0.41, n_lost=31.0, n_cells=4),
        dated=Dated(last_before=moment(412), first_after=moment(413)),
        changes=[Change(nuisance="build", level="b2", moment=moment(412))],
    )
    assert (made.id, made.grade, made.state, made.evidence_loss) == ("W7", "material", "standing", 0.41)
    assert "build b2 first ran at r0412" in made.finding.message
    assert made.remedy.endswith("Cost: about 32 runs.")


def test_a_fact_that_is_no_longer_so_is_withdrawn(make_finding, plan):
    """Its state says so."""
    gone = make_finding("gap", holds=False, message="every number has landed by now")
    assert caution(gone, plan, number=1, grade="material", raised_at=NOW).state == "withdrawn"
