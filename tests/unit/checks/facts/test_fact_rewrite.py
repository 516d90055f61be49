"""Records that changed."""

from auditd.checks.facts.rewrite import RewriteFact
from auditd.records import Refusal


def _refusal(i, kind="rewrite"):
    return Refusal(path="runs.ndjson", offset=i, number=i, reason="other content", kind=kind, id=f"r{i:04d}")


def test_a_changed_record_is_told_with_its_run_and_file(make_plan):
    """The refusal of the kind `rewrite` becomes a finding."""
    (found,) = RewriteFact(make_plan(), alarm_budget=0.01).refused(_refusal(3))
    assert (found.kind, found.run) == ("rewrite", "r0003")
    assert "runs.ndjson" in found.message


def test_other_refusals_are_silent(make_plan):
    """What could not be read or mapped is no rewrite."""
    fact = RewriteFact(make_plan(), alarm_budget=0.01)
    assert not [finding for kind in ("read", "mapping") for finding in fact.refused(_refusal(1, kind))]
    assert not list(fact.standing())


def test_rewrites_one_after_the_other_are_one_condition_and_later_ones_another(make_plan, make_run):
    """An exporter that writes a hundred records again is one warning; the same next week is a second."""
    fact = RewriteFact(make_plan(), alarm_budget=0.01)
    first = [finding for i in range(100) for finding in fact.refused(_refusal(i))] + list(fact.standing())
    assert {finding.key for finding in first} == {"rewrite:1"}
    assert len(first) < 45
    assert 90 <= first[-1].n <= 100
    fact.arrived(make_run(1000), 1000)
    assert [finding.key for finding in fact.refused(_refusal(200))] == ["rewrite:2"]
