"""Series and tables made by seed, for tests of the full audit that need no store."""

import numpy as np

from auditd.series.table import Coded, RunTable, Series

BEGAN = 1_804_000_000.0
"""POSIX seconds of the first run."""


def coded(codes, prefix="x"):
    codes = np.asarray(codes, dtype=np.int64)
    return Coded(codes=codes, levels=tuple(f"{prefix}{k}" for k in range(int(codes.max(initial=-1)) + 1)))


def series(
    values,
    *,
    cells=None,
    nuisance=None,
    started=None,
    finished=None,
    seeds=None,
    parents=None,
    ordered=True,
    response="energy",
):
    """Return a series; cells and nuisances are integer codes, times POSIX seconds, seeds texts."""
    values = np.asarray(values, dtype=np.float64)
    n = len(values)
    none = np.full(n, np.nan)
    seed_codes = None
    if seeds is not None:
        levels = tuple(dict.fromkeys(seeds))
        place = {text: k for k, text in enumerate(levels)}
        seed_codes = Coded(codes=np.array([place[text] for text in seeds], dtype=np.int64), levels=levels)
    return Series(
        response=response,
        values=values,
        row=np.arange(n),
        positions=np.arange(n),
        cells=coded(np.zeros(n, int) if cells is None else cells, "c"),
        nuisance={name: coded(codes, name) for name, codes in (nuisance or {}).items()},
        started=none if started is None else np.asarray(started, dtype=np.float64),
        finished=none if finished is None else np.asarray(finished, dtype=np.float64),
        seeds=seed_codes,
        parents=None if parents is None else np.asarray(parents, dtype=np.int64),
        ids=np.array([f"r{k:05d}" for k in range(n)], dtype=object),
        ordered=ordered,
    )


def table(responses, *, cells, nuisance, started=None, finished=None, ordered=True):
    """Return a table of runs in order; cells and nuisances are integer codes."""
    n = len(cells)
    none = np.full(n, np.nan)
    cells = coded(cells, "c")
    return RunTable(
        ids=np.array([f"r{k:07d}" for k in range(n)], dtype=object),
        positions=np.arange(n),
        arrivals=np.arange(n),
        late=np.zeros(n, bool),
        ordered=np.full(n, ordered),
        completed=np.ones(n, bool),
        set_aside=np.zeros(n, bool),
        sequence=none,
        started=none if started is None else started,
        finished=none if finished is None else finished,
        landed=none,
        cells=cells,
        cell_values=tuple({"scheme": level} for level in cells.levels),
        nuisance={name: coded(codes, name) for name, codes in nuisance.items()},
        seeds=None,
        parents=None,
        stages=None,
        responses=responses,
    )


def campaign(n, *, n_cells=4, n_hosts=4, law="normal", seed=0, sorted_cells=False):
    """Return values, cells, hosts, starts and finishes of n exchangeable runs."""
    rng = np.random.default_rng(seed)
    cells = rng.integers(0, n_cells, n) if n_cells * 20 < n else np.arange(n) * n_cells // n
    if sorted_cells:
        cells = np.sort(cells)
    draw = {
        "normal": lambda: rng.normal(size=n),
        "lognormal": lambda: rng.lognormal(size=n),
        "t": lambda: rng.standard_t(3, size=n),
    }[law]
    started = BEGAN + np.cumsum(rng.exponential(1800.0, n))
    return {
        "values": draw() + cells,
        "cells": cells,
        "nuisance": {"host": rng.integers(0, n_hosts, n)},
        "started": started,
        "finished": started + rng.uniform(300, 3000, n),
    }
