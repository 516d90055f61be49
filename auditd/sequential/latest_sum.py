"""Sum, over levels, of each level's latest value, after every run."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.wealth import log_sum

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

N_RUNS_AT_ONCE = 64
"""Runs a slice when levels are many: at most so many levels change in a slice."""


def log_sum_of_latest(code: IntArray, log_value: FloatArray, latest: FloatArray) -> FloatArray:
    """Follow log Σ_levels exp(latest value), where run t sets its level's value.

    Parameters
    ----------
    code : (n,) level set by each run.
    log_value : (n,) its new value.
    latest : (levels,) values before the block, −inf where there is none yet; updated in place.

    Returns
    -------
    (n,) the log sum after each run.
    """
    if latest.size <= N_RUNS_AT_ONCE:
        return _slice(code, log_value, latest, np.arange(latest.size), -np.inf)
    result = np.empty(code.size)
    for begin in range(0, code.size, N_RUNS_AT_ONCE):
        part = slice(begin, begin + N_RUNS_AT_ONCE)
        moving = np.unique(code[part])
        still = np.delete(latest, moving)
        rest = float(log_sum(still[:, None])[0]) if still.size else -np.inf
        place = np.searchsorted(moving, code[part])
        part_latest = latest[moving]
        result[part] = _slice(place, log_value[part], part_latest, np.arange(moving.size), rest)
        latest[moving] = part_latest
    return result


def _slice(
    code: IntArray, log_value: FloatArray, latest: FloatArray, levels: IntArray, rest: float
) -> FloatArray:
    n = code.size
    when = np.where(code[None, :] == levels[:, None], np.arange(1, n + 1)[None, :], 0)
    when = np.maximum.accumulate(when, axis=1)
    values = np.concatenate((latest[:, None], np.broadcast_to(log_value, (levels.size, n))), axis=1)
    current = np.take_along_axis(values, when, axis=1)
    latest[:] = current[:, -1]
    if rest > -np.inf:
        current = np.concatenate((current, np.full((1, n), rest)), axis=0)
    return log_sum(current)
