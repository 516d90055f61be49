"""What follows an alarm: its effect from later runs, and the epoch after an answer."""

import numpy as np
import pytest

from auditd.errors import NotTestable
from auditd.sequential import Auditor, EarlierRuns, Options, effect_after, replay


def planted(kind, seed=3, n=900):
    rng = np.random.default_rng(seed)
    cells, host = rng.integers(4, size=n), rng.integers(4, size=n)
    e, late = rng.normal(size=n), np.arange(n) >= 300
    if kind == "drift":
        e = e + 1.0 * late
    elif kind == "host":
        e = e + 1.5 * (late & (host == 2))
    elif kind == "spread":
        e = e * np.where(late, 1.8, 1.0)
    elif kind == "serial":
        for t in range(1, n):
            e[t] = 0.6 * e[t - 1] + 0.8 * e[t]
    elif kind == "batch":
        e = np.sqrt(0.5) * rng.normal(size=12)[np.arange(n) % 12] + np.sqrt(0.5) * e
        host = np.arange(n) % 12
    return e + 10.0 * cells, cells.astype(str), host.astype(str)


@pytest.mark.parametrize(
    ("kind", "low", "high"),
    [("drift", 0.7, 1.3), ("spread", 1.5, 2.1), ("serial", 0.45, 0.72), ("batch", 0.2, 0.75)],
)
def test_the_effect_of_a_planted_dependence_is_estimated_after_its_alarm(kind, low, high):
    """The estimate lies near the truth and inside its own interval, in the unit of the response."""
    values, cells, host = planted(kind)
    found = replay(values, cells=cells, nuisance={"host": host})
    first = next(alarm for alarm in found.alarms if alarm.kind == kind)
    levels = None if first.along == "order" else host
    effect = effect_after(first, values=values, scores=found.scores, cells=cells, levels=levels)
    assert effect.low < effect.value < effect.high
    assert low < effect.value < high


def test_the_shift_of_one_host_is_that_hosts():
    """Only the named level's runs enter the estimate."""
    values, cells, host = planted("host")
    found = replay(values, cells=cells, nuisance={"host": host})
    first = found.alarms[0]
    assert (first.kind, first.along, first.level) == ("drift", "host", "2")
    effect = effect_after(first, values=values, scores=found.scores, cells=cells, levels=host)
    assert effect.low < 1.5 < effect.high
    assert effect.n == int(((host == "2") & (np.arange(host.size) > first.index)).sum())


def test_at_the_alarm_itself_there_is_no_estimate_yet():
    """Thirty runs after it are needed."""
    values, cells, _ = planted("drift")
    index = replay(values, cells=cells).alarms[0].index
    cut = slice(0, index + 10)
    found = replay(values[cut], cells=cells[cut])
    with pytest.raises(NotTestable):
        effect_after(found.alarms[0], values=values[cut], scores=found.scores, cells=cells[cut])


def test_a_primed_audit_needs_no_warm_up_and_finds_the_next_fault_as_soon():
    """After an absorbed host step a second host's step is found within 1.3 × its delay alone (medians)."""
    alone, second = [], []
    for seed in range(30):
        rng = np.random.default_rng([21, seed])
        n = 1000
        cells, host = rng.integers(4, size=n).astype(str), rng.integers(4, size=n).astype(str)
        fault = rng.normal(size=n) + 1.5 * ((np.arange(n) >= 500) & (host == "1"))
        first = fault + 1.5 * ((np.arange(n) >= 250) & (host == "0"))
        options = Options(nuisances=("host",), alarm_budget=0.05)
        auditor = Auditor(options)
        got = auditor.advance(fault, cells, ids=[str(i) for i in range(n)], nuisance={"host": host})
        alone.append(next((a.index for a in got.alarms if a.index >= 500), n) - 500)
        # Absorbed at run 400: host 0's runs from its change on are corrected by the effect known by then.
        moved = (host == "0") & (np.arange(n) >= 250)
        known = (
            first[moved & (np.arange(n) < 400)].mean() - first[(host == "0") & (np.arange(n) < 250)].mean()
        )
        corrected = first - known * moved
        earlier = EarlierRuns(
            values=corrected[:400],
            cells=cells[:400],
            ids=[str(i) for i in range(400)],
            nuisance={"host": host[:400]},
        )
        after = Auditor.primed(Options(nuisances=("host",), alarm_budget=0.05 / 4), earlier)
        assert (after.n_runs, after.n_scored) == (400, 0)
        later = after.advance(
            corrected[400:],
            cells[400:],
            ids=[str(i) for i in range(400, n)],
            nuisance={"host": host[400:]},
        )
        second.append(next((a.index for a in later.alarms if a.index >= 500), n) - 500)
    assert np.median(second) <= 1.3 * np.median(alone)


def test_a_primed_audit_continues_from_its_bytes():
    """Dump and load of an audit with a reference from before its epoch change nothing."""
    values, cells, host = planted("drift")
    ids = [str(i) for i in range(values.size)]

    def runs(end):
        return EarlierRuns(
            values=values[:end], cells=cells[:end], ids=ids[:end], nuisance={"host": host[:end]}
        )

    def rest(auditor, begin):
        return auditor.advance(
            values[begin:], cells[begin:], ids=ids[begin:], nuisance={"host": host[begin:]}
        )

    options = Options(nuisances=("host",), key=b"epoch 2")
    whole = rest(Auditor.primed(options, runs(200)), 200)
    auditor = Auditor.primed(options, runs(200))
    auditor.advance(values[200:260], cells[200:260], ids=ids[200:260], nuisance={"host": host[200:260]})
    again = rest(Auditor.load(auditor.dump(), runs(260)), 260)
    for key, path in again.log_e.items():
        np.testing.assert_allclose(path, whole.log_e[key][60:], atol=1e-9)
    assert [(a.key, a.index, a.since) for a in again.alarms] == [
        (a.key, a.index, a.since) for a in whole.alarms if a.index >= 260
    ]
