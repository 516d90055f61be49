"""What replay takes, gives and refuses."""

import numpy as np
import pytest

from auditd.errors import BadInput
from auditd.sequential import Auditor, EarlierRuns, Options, replay


def runs(n=400, seed=0):
    rng = np.random.default_rng(seed)
    return {
        "values": rng.normal(size=n),
        "cells": rng.integers(4, size=n).astype(str),
        "nuisance": {"host": rng.integers(4, size=n).astype(str)},
        "times": np.arange(n) * 400.0,
    }


def test_the_contract_of_replay_holds():
    """Arrays of one length, seven families for one nuisance and times, alarms with their fields."""
    whole = runs()
    whole["values"][200:] += 2.0
    found = replay(**whole)
    assert set(found.log_e) == {
        ("serial", "order"),
        ("drift", "order"),
        ("spread", "order"),
        ("clock", "order"),
        ("serial", "host"),
        ("drift", "host"),
        ("batch", "host"),
    }
    assert found.n_asked == 7
    assert found.scores.shape == (400,)
    assert all(path.shape == (400,) for path in found.log_e.values())
    first = found.alarms[0]
    assert (first.kind, first.along, first.lead) == ("drift", "order", True)
    assert first.log_e == found.log_e[first.key][first.index]
    assert 200 <= first.index < 240
    assert first.since_low <= 200 <= first.since_high
    assert {explained.kind for explained in first.explains} <= {"serial", "drift", "batch", "spread"}


def test_the_first_alarm_is_where_the_mean_reaches_the_inverse_of_the_budget():
    """Recomputed from the e-processes alone; later alarms are where a family reaches K / budget."""
    whole = runs()
    whole["values"][200:] += 1.0
    found = replay(**whole, alarm_budget=0.02, n_responses=3)
    paths = np.vstack(list(found.log_e.values()))
    mean = np.logaddexp.reduce(paths, axis=0) - np.log(paths.shape[0] * 3)
    assert found.alarms[0].index == np.flatnonzero(mean >= np.log(1 / 0.02))[0]
    for alarm in found.alarms[1:]:
        own = found.log_e[alarm.key]
        at = np.flatnonzero((own >= np.log(21 / 0.02)) & (np.arange(own.size) >= found.alarms[0].index))
        assert alarm.index == at[0]


def test_runs_without_a_value_or_a_reference_are_not_scored_and_carry_the_evidence_on():
    """NaN, infinities and the first run of each cell have no score, and the e-values stand still there."""
    whole = runs()
    whole["values"][[50, 51]] = [np.nan, np.inf]
    found = replay(**whole)
    firsts = [int(np.flatnonzero(whole["cells"] == cell)[0]) for cell in "0123"]
    assert set(np.flatnonzero(np.isnan(found.scores))) == {50, 51, *firsts}
    for path in found.log_e.values():
        assert path[49] == path[50] == path[51]


@pytest.mark.parametrize("n", [0, 1, 2])
def test_tiny_series_are_no_error(n):
    """Nothing to say is an answer of the right length."""
    found = replay(np.zeros(n), cells=["a"] * n)
    assert found.scores.size == n
    assert not found.alarms


def test_a_constant_response_never_alarms():
    """All ties: the ranks are the randomisers, as independent of each other as under the null."""
    whole = runs()
    whole["values"][:] = 4.0
    assert not replay(**whole).alarms


def test_a_nuisance_with_one_run_a_level_is_left_out():
    """Such a nuisance can show nothing and costs no budget."""
    whole = runs()
    whole["nuisance"]["job"] = np.arange(400).astype(str)
    assert replay(**whole).n_asked == 7


@pytest.mark.parametrize(
    "wrong",
    [
        {"cells": ["a"] * 3},
        {"values": ["x"] * 400},
        {"values": np.zeros((400, 2))},
        {"nuisance": {"host": ["a"]}},
        {"nuisance": {"order": ["a", "b"] * 200}},
        {"nuisance": ["a"] * 400},
        {"times": np.zeros(5)},
        {"parents": np.full(400, 400)},
        {"parents": np.full(400, -2)},
        {"parents": np.full(400, 0.5)},
        {"alarm_budget": 0.0},
        {"alarm_budget": 1.0},
        {"alarm_budget": float("nan")},
        {"n_responses": 0},
        {"baseline": "mean"},
        {"baseline": "formula"},
        {"baseline": "formula", "design": np.ones((4, 1))},
        {"baseline": "formula", "design": np.full((400, 1), np.nan)},
        {"key": b"x" * 65},
        {"key": "text"},
        {"ids": ["a"]},
    ],
)
def test_malformed_input_is_refused_with_its_reason(wrong):
    """Each is BadInput with a text, never a wrong number."""
    with pytest.raises(BadInput, match=r"\w{3}"):
        replay(**(runs() | wrong))


def test_the_key_and_the_response_change_only_the_randomisers():
    """Another key gives other scores; the order of continuous ranks stays nearly the same."""
    whole = runs()
    a, b, c = replay(**whole), replay(**whole, key=b"k"), replay(**whole, response="time")
    known = np.isfinite(a.scores)
    assert not np.array_equal(a.scores[known], b.scores[known])
    assert not np.array_equal(a.scores[known], c.scores[known])
    assert np.corrcoef(a.scores[known][100:], b.scores[known][100:])[0, 1] > 0.95


def test_lineage_is_found_along_parents_and_named():
    """Restarts that keep 0.8 of their parent's deviation, while the order shows nothing."""
    rng = np.random.default_rng(4)
    n = 400
    values, parents = rng.normal(size=n), np.full(n, -1)
    for t in range(60, n):
        parents[t] = rng.integers(0, t - 50)
        values[t] = 0.8 * values[parents[t]] + 0.6 * rng.normal()
    found = replay(values, cells=["a"] * n, parents=parents)
    assert found.alarms[0].key == ("lineage", "order")


def test_a_withheld_kind_is_not_asked():
    """A sweep in ascending order asks no drift, and K shrinks with it."""
    auditor = Auditor(Options(nuisances=("host",), withheld=("drift",)))
    assert ("drift", "order") not in auditor.keys
    assert ("drift", "host") not in auditor.keys
    assert auditor.n_asked == 4


def test_a_state_is_small_and_refuses_other_runs_and_other_bytes():
    """The dump of 20,000 runs stays below 200 kB; it takes back only what it covers."""
    whole = runs(20_000) | {"ids": [str(i) for i in range(20_000)]}
    auditor = Auditor(Options(nuisances=("host",), has_times=True))
    auditor.advance(**whole)
    data = auditor.dump()
    assert len(data) < 200_000
    assert data == auditor.dump()
    with pytest.raises(BadInput, match="covers 20000 runs"):
        Auditor.load(data)
    other = dict(whole, values=np.where(np.arange(20_000) == 7, np.nan, whole["values"]))
    with pytest.raises(BadInput, match="not the ones"):
        Auditor.load(data, EarlierRuns(**other))
    with pytest.raises(BadInput, match="no audit state"):
        Auditor.load(b"\x81\xa1x\x01", EarlierRuns(**whole))
    with pytest.raises(BadInput):
        Auditor.load(b"", EarlierRuns(**whole))
