"""Tables of runs made of arrays, for tests of what reads them; no store behind."""

import numpy as np

from auditd.records import cell_label
from auditd.series.table import Coded, RunTable

START_S = 1_800_000_000.0


def coded(labels):
    """Return labels as codes into their sorted levels."""
    levels = tuple(sorted(set(labels)))
    return Coded(codes=np.array([levels.index(one) for one in labels], dtype=np.int64), levels=levels)


def table_of(responses, *, cells=None, nuisance=None, **changed):
    """Return a table of completed runs r0000, r0001 … ten minutes apart; cells are dicts."""
    n = len(next(iter(responses.values())))
    cells = [{}] * n if cells is None else cells
    labels = [cell_label(cell) for cell in cells]
    started = START_S + 600.0 * np.arange(n)
    columns = {
        "ids": np.array([f"r{k:04d}" for k in range(n)], dtype=object),
        "positions": np.arange(n),
        "arrivals": np.arange(n),
        "late": np.zeros(n, dtype=bool),
        "ordered": np.ones(n, dtype=bool),
        "completed": np.ones(n, dtype=bool),
        "set_aside": np.zeros(n, dtype=bool),
        "sequence": np.full(n, np.nan),
        "started": started,
        "finished": started + 300.0,
        "landed": started + 300.0,
        "cells": coded(labels),
        "cell_values": tuple(dict(zip(labels, cells, strict=True))[label] for label in sorted(set(labels))),
        "nuisance": {name: coded(levels) for name, levels in (nuisance or {}).items()},
        "seeds": None,
        "parents": None,
        "stages": None,
        "responses": {name: np.asarray(values, dtype=float) for name, values in responses.items()},
    }
    return RunTable(**(columns | changed))
