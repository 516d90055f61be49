"""Time of the sequential audit, in CPU seconds of this process."""

import statistics
import time

import numpy as np
import pytest

from auditd.sequential import Auditor, Options, replay

N_BULK = 40_000


def series(n):
    rng = np.random.default_rng(2)
    return {
        "values": rng.normal(size=n),
        "cells": rng.integers(4, size=n).astype(str),
        "nuisance": {"host": rng.integers(4, size=n).astype(str)},
        "times": np.arange(n) * 400.0,
    }


def cpu_s(work):
    began = time.process_time()
    work()
    return time.process_time() - began


@pytest.mark.slow
def test_bulk_takes_at_most_30_microseconds_a_run_and_response():
    """One nuisance and times, the better of three."""
    whole = series(N_BULK)
    best = min(cpu_s(lambda: replay(**whole)) for _ in range(3))
    assert best / N_BULK <= 30e-6


@pytest.mark.slow
def test_one_run_by_the_daemons_path_takes_at_most_one_millisecond():
    """Median over 300 single runs after 2,000 in bulk."""
    whole = series(2300)
    auditor = Auditor(Options(nuisances=("host",), has_times=True))
    ids = [str(i) for i in range(2300)]
    auditor.advance(
        whole["values"][:2000],
        whole["cells"][:2000],
        ids=ids[:2000],
        nuisance={"host": whole["nuisance"]["host"][:2000]},
        times=whole["times"][:2000],
    )
    taken = []
    for t in range(2000, 2300):
        began = time.process_time()
        auditor.observe(
            whole["values"][t],
            str(whole["cells"][t]),
            run_id=ids[t],
            nuisance={"host": str(whole["nuisance"]["host"][t])},
            time=whole["times"][t],
        )
        taken.append(time.process_time() - began)
    assert statistics.median(taken) <= 1e-3


@pytest.mark.slow
def test_bulk_is_at_least_fifteen_times_quicker_than_one_run_after_the_other():
    """What a user's loop over `observe` would cost against one replay."""
    whole = series(1500)
    bulk = min(cpu_s(lambda: replay(**whole)) for _ in range(3))

    def loop():
        auditor = Auditor(Options(nuisances=("host",), has_times=True))
        for t in range(1500):
            auditor.observe(
                whole["values"][t],
                str(whole["cells"][t]),
                run_id=str(t),
                nuisance={"host": str(whole["nuisance"]["host"][t])},
                time=whole["times"][t],
            )

    assert cpu_s(loop) > 15 * bulk
