"""What follows an answer: an epoch that opens with earlier runs as reference."""

import numpy as np

from auditd.sequential import Auditor, EarlierRuns, Options


def shifted(seed=3, n=900):
    rng = np.random.default_rng(seed)
    cells, host = rng.integers(4, size=n), rng.integers(4, size=n)
    e = rng.normal(size=n) + (np.arange(n) >= 300)
    return e + 10.0 * cells, cells.astype(str), host.astype(str)


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
    values, cells, host = shifted()
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
