"""What is stored to be shown: what a plan leaves unasked is said, and numbers agree with each other."""

import json

import pytest
from campaigns_made import PLAN, append, lay_out, records

from auditd.pipeline.asking import status_document
from auditd.pipeline.campaign import open_for_queries
from auditd.pipeline.gathering import gather
from auditd.pipeline.looking import compare
from auditd.pipeline.stored_evidence import evidence_document

BARE = PLAN.split("[[comparisons]]")[0]


def gathered(folder, plan, n=120):
    path = lay_out(folder, plan)
    append(folder, [record | {"stage": k // 40} for k, record in enumerate(records(n))])
    gather(path, lambda _step, _totals: None)
    return open_for_queries(path)


def shown(campaign):
    from auditd.pipeline.asking import now_utc

    return status_document(campaign, now_utc()), evidence_document(campaign)


@pytest.mark.parametrize(
    ("section", "withheld", "unchecked"),
    [
        ('[seeds]\nrole = "block"\n', "schedule.levels", "schedule.levels"),
        ('[design]\nallocation = "outcome"\n', "state design.stage", "state design.stage"),
        ('[design]\nallocation = "outcome"\nstage = "/stage"\n', None, "from one stage to the next"),
        ("", None, "lineage: record.parent is not stated"),
    ],
)
def test_what_a_plan_leaves_unasked_is_said(tmp_path, section, withheld, unchecked):
    """Nothing that is not audited is passed over in silence."""
    status, evidence = shown(gathered(tmp_path, BARE + section))
    assert any(unchecked in sentence for sentence in evidence["not_checked"])
    if withheld is None:
        assert status["withheld"] == []
        assert status["scored"] > 0
    else:
        assert withheld in status["withheld"][0]
        assert status["scored"] == 0
        assert all(one["would_see"] is None for one in status["responses"].values())


def test_cells_add_up_and_shares_are_shares(tmp_path):
    """A response's cells have its runs; parts multiply to the worth; losses lie below 1, bounds in order."""
    status, evidence = shown(gathered(tmp_path, PLAN, 200))
    for name, one in evidence["responses"].items():
        assert sum(cell["n"] for cell in one["cells"]) == one["n"] == status["responses"][name]["n"]
        product = 1.0
        for factor in one["parts"].values():
            product *= factor
        assert product == pytest.approx(one["n_effective"] / one["n"], rel=1e-6)
        assert one["loss_low"] <= one["loss"] <= one["loss_high"] <= 1
        assert 0 <= status["responses"][name]["evidence_loss"] <= 1
    assert json.loads(json.dumps(status, allow_nan=False)) == status


def test_status_loses_what_compare_loses(tmp_path):
    """The evidence lost in `status` is that of the worst comparison in `compare`, repeats and all."""
    path = lay_out(tmp_path, PLAN)
    made = records(200)
    for k, one in enumerate(made):
        if one["cfg"]["scheme"] == "staged" and k > 20:
            one["out"] = {"energy": 0.123456789012, "steps": 1.987654321098}
    append(tmp_path, made)
    gather(path, lambda _step, _totals: None)
    (compared,) = compare(path)["comparisons"]
    energy = shown(open_for_queries(path))[0]["responses"]["energy"]
    assert energy["evidence_loss"] == pytest.approx(compared["loss"], rel=1e-9)
    assert energy["evidence_loss"] > 0.5


def test_too_few_runs_are_said_to_be_too_few(tmp_path):
    """One run weighs nothing, and no number is made up for it."""
    _, evidence = shown(gathered(tmp_path, PLAN, 1))
    assert evidence["responses"] == {}
    assert "energy: too few completed runs to weigh" in evidence["not_checked"]
