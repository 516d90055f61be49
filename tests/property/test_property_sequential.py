"""What must hold of the sequential audit for any series."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from auditd.sequential import Auditor, EarlierRuns, Options, replay

N = 160


def series(seed, *, ties=False, gaps=False, shift=0.0):
    rng = np.random.default_rng(seed)
    y = rng.normal(size=N) + shift * (np.arange(N) > N // 2)
    y = np.round(y, 1) if ties else y
    if gaps:
        y[rng.random(N) < 0.1] = np.nan
    cells = rng.integers(3, size=N)
    design = np.column_stack((np.ones(N), cells == 1, cells == 2)).astype(float)
    parents = np.where(rng.random(N) < 0.3, np.arange(N) - 1 - rng.integers(3, size=N), -1)
    return {
        "values": y,
        "cells": cells.astype(str),
        "nuisance": {"host": rng.integers(6, size=N).astype(str), "build": (np.arange(N) // 70).astype(str)},
        "times": np.arange(N) * 5000.0,
        "parents": np.maximum(parents, -1),
        "design": design,
    }


def part(whole, begin, end):
    cut = {name: value[begin:end] for name, value in whole.items() if name != "nuisance"}
    cut["nuisance"] = {name: value[begin:end] for name, value in whole["nuisance"].items()}
    return cut | {"ids": [str(i) for i in range(begin, end)]}


def opened(baseline):
    return Auditor(
        Options(nuisances=("host", "build"), baseline=baseline, has_times=True, has_parents=True, key=b"key")
    )


cuts = st.lists(st.integers(1, N - 1), max_size=8).map(lambda found: [0, *sorted(set(found)), N])


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 10_000),
    cut=cuts,
    baseline=st.sampled_from(["cells", "pooled", "formula"]),
    ties=st.booleans(),
    gaps=st.booleans(),
    shift=st.sampled_from([0.0, 2.0]),
)
def test_any_split_into_blocks_gives_the_same_result(seed, cut, baseline, ties, gaps, shift):
    """Blocks of any sizes, with a restart from bytes between them, agree with one replay to 1e-9."""
    whole = series(seed, ties=ties, gaps=gaps, shift=shift)
    expected = replay(**whole, baseline=baseline, key=b"key")
    auditor = opened(baseline)
    scores, paths, alarms = [], [], []
    for begin, end in pairwise(cut):
        got = auditor.advance(**part(whole, begin, end))
        scores.append(got.scores)
        paths.append(np.vstack(list(got.log_e.values())))
        alarms += got.alarms
        auditor = Auditor.load(auditor.dump(), EarlierRuns(**part(whole, 0, end)))
    np.testing.assert_allclose(np.concatenate(scores), expected.scores, atol=1e-9)
    np.testing.assert_allclose(
        np.concatenate(paths, axis=1), np.vstack(list(expected.log_e.values())), atol=1e-9
    )
    named = [(a.key, a.index, a.lead, a.level, a.since, a.since_low, a.since_high) for a in alarms]
    assert named == [
        (a.key, a.index, a.lead, a.level, a.since, a.since_low, a.since_high) for a in expected.alarms
    ]


@settings(max_examples=5, deadline=None)
@given(seed=st.integers(0, 10_000), baseline=st.sampled_from(["cells", "pooled", "formula"]))
def test_observe_agrees_with_replay(seed, baseline):
    """One run after the other by the daemon's quick path equals the replay of all to 1e-9."""
    whole = series(seed, ties=True, gaps=True, shift=1.5)
    expected = replay(**whole, baseline=baseline, key=b"key")
    auditor = opened(baseline)
    for t in range(N):
        got = auditor.observe(
            float(whole["values"][t]),
            str(whole["cells"][t]),
            run_id=str(t),
            nuisance={name: str(labels[t]) for name, labels in whole["nuisance"].items()},
            time=float(whole["times"][t]),
            parent=int(whole["parents"][t]),
            design=whole["design"][t],
        )
        np.testing.assert_allclose(got.scores, expected.scores[t : t + 1], atol=1e-9)
        for key, path in expected.log_e.items():
            assert got.log_e[key][0] == pytest.approx(path[t], abs=1e-9)


@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_increasing_transformations_of_a_response_change_nothing(seed):
    """Scores rest on ranks within cells: an increasing map of the values changes nothing."""
    whole = series(seed)
    whole.pop("design")
    changed = dict(whole, values=np.exp(whole["values"]) * np.where(whole["cells"] == "1", 50.0, 2.0))
    a, b = replay(**whole), replay(**changed)
    np.testing.assert_array_equal(a.scores, b.scores)
    assert [(x.key, x.index) for x in a.alarms] == [(x.key, x.index) for x in b.alarms]


@settings(max_examples=10, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_renamed_labels_change_nothing_and_inputs_stay_as_they_are(seed):
    """Cells and levels are names only, and the caller's arrays are not written to."""
    whole = series(seed)
    before = {name: np.array(value, copy=True) for name, value in whole.items() if name != "nuisance"}
    a = replay(**whole)
    renamed = dict(whole, cells=np.char.add("cell ", whole["cells"]))
    renamed["nuisance"] = {name: np.char.add("x", value) for name, value in whole["nuisance"].items()}
    b = replay(**renamed)
    for key, path in a.log_e.items():
        np.testing.assert_array_equal(path, b.log_e[key])
    for name, value in before.items():
        np.testing.assert_array_equal(value, whole[name])
