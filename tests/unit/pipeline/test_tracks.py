"""A track saved and continued is one that never stopped; a state of other runs is refused."""

import dataclasses
import logging

import msgspec
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from auditd.pipeline.tracks import Track
from auditd.sequential import EarlierRuns, Options

OPTIONS = Options(
    nuisances=("host",), has_times=True, alarm_budget=0.03, n_responses=2, key=b"key", response="y"
)
N = 260


def some(first=0, until=N, seed=4):
    rng = np.random.default_rng(seed)
    y = rng.normal(size=N)
    hosts = [f"h{k}" for k in rng.integers(0, 3, N)]
    y += np.where((np.arange(N) >= 90) & (np.array(hosts) == "h1"), 2.5, 0.0)
    cells = [f"c{k}" for k in rng.integers(0, 2, N)]
    part = slice(first, until)
    return EarlierRuns(
        values=y[part],
        cells=cells[part],
        ids=[f"r{k}" for k in range(N)][part],
        nuisance={"host": hosts[part]},
        times=600.0 * np.arange(N)[part],
    )


def whole(seed=4):
    track = Track("y", "", OPTIONS)
    return track, track.advance(some(seed=seed), 1, 100)


def test_indices_are_places_of_the_campaign():
    """The auditor counts from 0, the track from the epoch's first place; since is no later than raised."""
    track, alarms = whole()
    assert alarms
    for raised in alarms:
        assert raised.index == raised.alarm.index + 100
        assert 100 <= raised.since_low <= raised.since <= raised.since_high <= raised.index
    assert (track.name, track.title) == ("audit:y:", "y")
    assert Track("y", "block means", OPTIONS).title == "y (block means)"


@settings(max_examples=12, deadline=None)
@given(cuts=st.lists(st.integers(1, N - 1), max_size=3, unique=True).map(sorted))
def test_saved_and_resumed_anywhere_equals_never_stopped(cuts):
    """However often a process ends, evidence agrees to 1e-9, and alarms and paths are the same."""
    straight, expected = whole()
    alarms, first = [], 0
    track = Track("y", "", OPTIONS)
    for until in [*cuts, N]:
        alarms += track.advance(some(first, until), 1, 100)
        saved = track.checkpoint(1, 100)
        assert saved.position == 100 + until
        track = Track("y", "", OPTIONS)
        assert track.resume(saved, some(0, until))
        first = until
    assert [(a.index, a.alarm.key, a.alarm.level) for a in alarms] == [
        (a.index, a.alarm.key, a.alarm.level) for a in expected
    ]
    for key, log_e in straight.auditor.log_e.items():
        assert track.auditor.log_e[key] == pytest.approx(log_e, abs=1e-9)
    assert track.recorder.names == straight.recorder.names
    np.testing.assert_allclose(track.recorder.highest, straight.recorder.highest, atol=1e-9)


def foreign(checkpoint, kind):
    if kind == "runs":
        other = some()
        return checkpoint, dataclasses.replace(
            other, nuisance={"host": [f"n{h}" for h in other.nuisance["host"]]}
        )
    if kind == "fewer":
        return checkpoint, some(0, N - 1)
    if kind == "torn":
        return msgspec.structs.replace(checkpoint, body=checkpoint.body[:-40]), some()
    return msgspec.structs.replace(checkpoint, body=b"\x93nonsense"), some()


@pytest.mark.parametrize("kind", ["runs", "fewer", "torn", "nonsense"])
def test_a_state_of_other_runs_is_refused_and_said_so(kind, caplog):
    """Runs on other hosts, fewer runs or broken bytes are never continued; the runs are audited again."""
    saved = whole()[0].checkpoint(1, 100)
    track = Track("y", "", OPTIONS)
    before = track.auditor
    with caplog.at_level(logging.WARNING, "auditd"):
        assert not track.resume(*foreign(saved, kind))
    assert "audited again" in caplog.text
    assert track.auditor is before


def test_a_state_under_other_options_is_refused():
    """Another budget or key is another audit."""
    saved = whole()[0].checkpoint(1, 100)
    other = Track(
        "y", "", Options(nuisances=("host",), has_times=True, alarm_budget=0.02, n_responses=2, key=b"key")
    )
    assert not other.resume(saved, some())


def test_a_primed_track_ranks_among_earlier_runs_without_betting_on_them():
    """After a repair of one level the runs before count as reference: nothing is scored, none is bet on."""
    track = Track("y", "", OPTIONS)
    track.prime(some(0, 80))
    assert track.auditor.n_scored == 0
    assert track.advance(some(80, 90), 2, 0) == []
    assert track.auditor.n_scored == 10
