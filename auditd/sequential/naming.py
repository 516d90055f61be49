"""Which family leads a first alarm: what the evidence is called, once there is enough of it.

The alarm itself does not depend on anything here, so that no rule of this module can spoil its error rate.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
import numpy.typing as npt

from auditd.sequential.dating import log_weight_of_shift
from auditd.sequential.scored_series import ScoredSeries
from auditd.sequential.wealth import log_mean

FloatArray = npt.NDArray[np.float64]
Key = tuple[str, str]

LEAD_BONUS: Final = {"drift": -0.9, "spread": -0.9, "batch": 0.4}
LEAD_BONUS_SHARED: Final = {"serial": 0.8, "drift": -3.0}
LEAD_BONUS_ALONE: Final = {"serial": -1.0, "drift": -1.0}
"""Nats that a kind is given beyond its log e-value; 0 where none is named. The kind with fewer moving parts
leads when it is close: a constant for each level (`batch`) before a path for each level (`drift` shared by
levels), which needs more than a path of one level alone."""

SHIFT_BONUS_ORDER: Final = -0.2
SHIFT_BONUS_LEVEL: Final = -1.2
"""Nats that the evidence for one shift at one run is given when it speaks for `drift`. A level that jumped
and stays looks to the bets like a strong signal; one constant after one run has fewer moving parts than that.

All bonuses were fitted by simulation, to name the planted kind as evenly as possible over the kinds that
tests/calibration plants."""

N_RUNS_LOOKED_AT: Final = 20_000
"""Scored runs in which a shift is sought."""


def choose_leader(log_e: Mapping[Key, float], shared: Mapping[Key, bool], shift: Mapping[str, float]) -> Key:
    """Name the family that leads a first alarm.

    Parameters
    ----------
    log_e : log e-values at the alarm.
    shared : for `serial` and `drift` along a nuisance, whether all levels together show more than one alone.
    shift : evidence for one shift at one run, by "order" or nuisance (there: in one level).
    """

    def standing(key: Key) -> float:
        kind, along = key
        table = LEAD_BONUS if key not in shared else LEAD_BONUS_SHARED if shared[key] else LEAD_BONUS_ALONE
        own = log_e[key] + table.get(kind, 0.0)
        if kind != "drift" or along not in shift:
            return own
        bonus = SHIFT_BONUS_ORDER if along == "order" else SHIFT_BONUS_LEVEL
        return max(own, shift[along] + bonus)

    return max(log_e, key=standing)


def shift_evidence(series: ScoredSeries, n_scored: int) -> dict[str, float]:
    """Give the log evidence for one shift, its run evenly mixed, along the order and within one level."""
    window = np.arange(max(0, n_scored - N_RUNS_LOOKED_AT), n_scored)
    z = series.history.z[series.history.index[window]]
    evidence = {"order": _log_evidence(z)}
    for name in series.levels:
        code = series.history.codes(name)[window]
        single = [_log_evidence(z[code == level]) for level in np.unique(code)]
        evidence[name] = max(single) - float(np.log(len(single)))
    return evidence


def _log_evidence(z: FloatArray) -> float:
    return float(log_mean(log_weight_of_shift(z)[:, None])[0])
