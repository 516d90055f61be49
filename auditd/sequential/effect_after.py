"""An alarm's effect, estimated anew from the runs after it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from auditd.errors import NotTestable
from auditd.sequential.alarm import Alarm
from auditd.sequential.effect import (
    N_RUNS_MIN,
    Effect,
    amplitude,
    inheritance,
    intraclass,
    lag_one,
    shift,
    spread_ratio,
)
from auditd.sequential.grids import CLOCK_PERIOD_S
from auditd.sequential.run_block import labels, numbers

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]


def effect_after(
    alarm: Alarm,
    *,
    values: npt.ArrayLike,
    scores: npt.ArrayLike,
    cells: object,
    levels: object = None,
    times: npt.ArrayLike | None = None,
    parents: npt.ArrayLike | None = None,
) -> Effect:
    """Estimate the effect of an alarm from the runs after it.

    Parameters
    ----------
    alarm : an alarm of the series.
    values, scores : (n,) response and scores of the epoch so far, in order.
    cells : (n,) labels.
    levels : (n,) labels of the alarm's nuisance, for an alarm along one.
    times : (n,) POSIX seconds, for `clock`.
    parents : (n,) indices, for `lineage`.

    Returns
    -------
    Effect: `drift` a shift in the response's unit, against the cells' means before the earliest start not
    excluded; `spread` a ratio of standard deviations, likewise; `serial`, `batch` and `lineage` correlations
    of scores; `clock` an amplitude in the unit of the response.

    Raises
    ------
    NotTestable : fewer than 30 runs after the alarm, or nothing to compare them with.
    """
    y, z = numbers(values, "values", ndim=1), numbers(scores, "scores", ndim=1)
    after = np.arange(y.size) > alarm.index
    named = None if levels is None else np.array(labels(levels, "levels", y.size), dtype=object)
    if alarm.kind == "serial":
        return lag_one(z[after], None if named is None else _codes(named)[after])
    if alarm.kind == "batch":
        if named is None:
            raise NotTestable("the labels of the alarm's nuisance", "none")
        return intraclass(z[after], _codes(named)[after])
    if alarm.kind == "lineage":
        return inheritance(z[after], _parent_scores(z, parents)[after])
    deviation, before = _deviations(y, labels(cells, "cells", y.size), alarm)
    if alarm.kind == "clock":
        return _larger_cycle(deviation[after], times, after)
    if named is not None and alarm.level is not None:
        deviation = np.where(named == alarm.level, deviation, np.nan)
    estimate = spread_ratio if alarm.kind == "spread" else shift
    return estimate(deviation[before], deviation[after])


def _codes(named: npt.NDArray[np.object_]) -> npt.NDArray[np.int64]:
    codes: npt.NDArray[np.int64] = np.unique(named.astype(str), return_inverse=True)[1]
    return codes


def _parent_scores(z: FloatArray, parents: npt.ArrayLike | None) -> FloatArray:
    if parents is None:
        raise NotTestable("the runs' parents", "none")
    parent = numbers(parents, "parents", ndim=1).astype(np.int64)
    return np.where(parent >= 0, z[np.maximum(parent, 0)], np.nan)


def _deviations(y: FloatArray, cells: Sequence[str], alarm: Alarm) -> tuple[FloatArray, BoolArray]:
    """Take each cell's mean before the change off; `clock` has no before and takes the mean of all."""
    before = np.arange(y.size) < (y.size if alarm.kind == "clock" else alarm.since_low)
    if np.isfinite(y[before]).sum() < N_RUNS_MIN:
        before = np.arange(y.size) < alarm.since  # too few are certainly before it: the most probable start
    code = _codes(np.array(cells, dtype=object))
    known = before & np.isfinite(y)
    count = np.bincount(code[known], minlength=int(code.max(initial=0)) + 1)
    total = np.bincount(code[known], weights=y[known], minlength=count.size)
    mean = np.where(count > 1, total / np.maximum(count, 1), np.nan)
    return np.where(np.isfinite(y), y, np.nan) - mean[code], before


def _larger_cycle(deviation: FloatArray, times: npt.ArrayLike | None, after: BoolArray) -> Effect:
    if times is None:
        raise NotTestable("the runs' times", "none")
    t = numbers(times, "times", ndim=1)[after]
    cycles = [amplitude(deviation, t, period_s) for period_s in CLOCK_PERIOD_S[:1]]
    span = float(np.nanmax(t) - np.nanmin(t))
    cycles += [amplitude(deviation, t, period_s) for period_s in CLOCK_PERIOD_S[1:] if span >= period_s]
    return max(cycles, key=lambda effect: effect.value)
