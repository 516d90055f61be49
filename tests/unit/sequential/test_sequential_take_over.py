"""When a cycle takes a standing warning over, and when it must not."""

import numpy as np
import pytest

from auditd.sequential import Auditor, Options, replay
from auditd.sequential.alarm import crossings

SPACING_S = 86_400.0 / 218


def audited(values, host=None, **more):
    n = values.size
    nuisance = {} if host is None else {"host": host.astype(str)}
    return replay(values, cells=["a"] * n, nuisance=nuisance, times=np.arange(n) * SPACING_S, **more)


def cycle(n, amplitude):
    return amplitude * np.sin(2 * np.pi * np.arange(n) * SPACING_S / 86_400 + 0.7)


def test_a_cycle_takes_over_the_warning_of_the_slow_signal_that_followed_it():
    """`clock` leads, and names the newest leader before it as the one whose warning it takes over."""
    found = audited(np.random.default_rng(1).normal(size=1000) + cycle(1000, 0.6))
    clock = next(alarm for alarm in found.alarms if alarm.kind == "clock")
    assert clock.lead
    assert clock.replaces == [a.key for a in found.alarms if a.lead and a.index < clock.index][-1]


def test_a_weak_cycle_stays_under_a_leader_that_shows_far_more():
    """A host whose level falls by 4 sd leads; a cycle of 0.3 sd besides is listed under it."""
    n = 4000
    rng = np.random.default_rng(2)
    host = rng.integers(2, size=n)
    found = audited(rng.normal(size=n) + cycle(n, 0.3) - 4.0 * ((host == 1) & (np.arange(n) > 600)), host)
    clock = next(alarm for alarm in found.alarms if alarm.kind == "clock")
    assert not clock.lead
    assert clock.replaces is None
    assert clock.under is not None


@pytest.mark.parametrize("change", ["narrower", "wider", "a host leaves"])
def test_changes_of_level_and_spread_are_no_cycle(change):
    """Scores whose variance shrinks tenfold, or whose hosts leave, do not alarm `clock`."""
    n = 4000
    for seed in range(5):
        rng = np.random.default_rng([3, seed])
        late, host = np.arange(n) > 1500, rng.integers(4, size=n)
        e = rng.normal(size=n)
        if change == "a host leaves":
            host[late] = 0
            e = np.where(host == 0, 0.2 * e + 0.5, 2 * e)
        else:
            e = e * np.where(late, 0.1 if change == "narrower" else 4.0, 1.0)
        found = audited(e, host)
        assert found.alarms
        assert "clock" not in {alarm.kind for alarm in found.alarms}


@pytest.mark.parametrize("size", [1, 7, 100, 333])
def test_a_take_over_falls_on_the_same_run_however_the_runs_are_split(size):
    """Blocks of any size name the same alarms, with the same leader taken over."""
    n = 900
    values = np.random.default_rng(5).normal(size=n) + cycle(n, 0.5)
    expected = [(a.key, a.index, a.replaces) for a in audited(values).alarms]
    assert any(replaced for *_, replaced in expected)
    auditor = Auditor(Options(has_times=True))
    for begin in range(0, n, size):
        end = min(begin + size, n)
        auditor.advance(
            values[begin:end],
            ["a"] * (end - begin),
            ids=[str(i) for i in range(begin, end)],
            times=np.arange(begin, end) * SPACING_S,
        )
    assert [(a.key, a.index, a.replaces) for a in auditor.alarms] == expected


@pytest.mark.parametrize(("before", "expected"), [(2.0, [0, 4]), (3.5, [4])])
def test_a_take_over_is_asked_where_evidence_rises_to_the_threshold_only(before, expected):
    """Staying above it, also from the block before, asks no more; falling and rising again does."""
    clock = ("clock", "order")
    found = crossings(
        {clock: np.array([3.1, 3.4, 3.2, 2.9, 3.3, 5.5])},
        np.zeros(6),
        before={clock: before},
        threshold_first=3.0,
        threshold_own=5.0,
        raised=frozenset({("drift", "order")}),
        leader_at=lambda at: clock,
    )
    assert [one.at for one in found if one.renames] == expected
    assert [(one.at, one.threshold) for one in found if not one.renames] == [(5, 5.0)]
