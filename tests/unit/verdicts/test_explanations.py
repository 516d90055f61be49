"""What `explain` tells."""

import textwrap
import typing

import pytest

import auditd.stats
from auditd.checks.full_audit import CHECKS as CHECKS_ASKED
from auditd.errors import BadInput
from auditd.records import Kind
from auditd.verdicts.explanations import CHECKS, KINDS, explain


def test_every_kind_of_warning_can_be_explained():
    """The kinds of the records, no more and no fewer."""
    assert set(KINDS) == set(typing.get_args(Kind))


@pytest.mark.parametrize("kind", [*KINDS, *CHECKS])
def test_an_explanation_says_everything_on_ten_to_twenty_lines(kind):
    """Question, ground, blind spots, what to do and a source with a year, to be read on one screen."""
    told = explain(kind)
    parts = [told.title, told.asks, told.rests_on, told.blind_to, told.do, told.source]
    assert all(len(part) >= 25 for part in parts[1:])
    lines = sum(len(textwrap.wrap(part, 76)) for part in parts)
    assert 6 <= lines <= 24
    assert not any("  " in part or "\n" in part for part in parts)


def test_every_check_of_the_full_audit_can_be_explained():
    """What `audit` names, `explain` knows."""
    assert {check.name for check in CHECKS_ASKED} <= set(CHECKS)


def test_estimators_are_functions_that_exist():
    """Besides the audit's own checks the names are those of the public functions."""
    own = {check.name for check in CHECKS_ASKED}
    missing = {name for name in set(CHECKS) - own if name not in auditd.stats.__all__}
    assert missing <= {"cluster_covariance", "welch_anova"}


def test_an_unknown_name_is_refused_with_the_nearest():
    """A typing mistake costs one look."""
    with pytest.raises(BadInput, match="drift"):
        explain("drfit")
    with pytest.raises(BadInput, match="kinds are"):
        explain("zzzzzz")
    assert explain("Durbin-Watson").kind == "durbin_watson"
