"""From a crossing to what an operator needs: level, dates, and what the leader explains."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt

from auditd.sequential.alarm import (
    LASTING_KINDS,
    N_RUNS_SOON,
    TAKE_OVER_SHARE,
    Alarm,
    Crossing,
    Explained,
    Key,
    can_explain,
    can_take_over,
)
from auditd.sequential.bets_clock import ClockCycle
from auditd.sequential.book import Book
from auditd.sequential.dating import (
    N_RUNS_DATED,
    log_weight_of_bets,
    log_weight_of_shift,
    log_weight_of_spread,
    starts_not_excluded,
)
from auditd.sequential.history import History
from auditd.sequential.levels import LevelCodes, group
from auditd.sequential.questions import fresh_bets
from auditd.sequential.scored_block import ScoredBlock
from auditd.sequential.scored_series import ScoredSeries

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LISTED_LOG_E = float(np.log(3.0))
"""Families below this log e-value show nothing worth listing beside a leader."""


def describe(
    crossing: Crossing,
    *,
    log_e: Mapping[Key, float],
    log_mean: float,
    book: Book,
    series: ScoredSeries,
    n_scored: int,
    standing: Sequence[Alarm],
) -> Alarm | None:
    """Make the alarm of a crossing; None where it could only take a warning over and does not."""
    history, levels = series.history, series.levels
    named = {key: _level(key, crossing.at, book, series, n_scored) for key in log_e}
    level = named[crossing.key]
    since, low, high = _dates(crossing.key, level, history, levels, n_scored)
    index = int(history.index[n_scored - 1])
    renamed = _warning_taken_over(crossing.key, log_e, history, n_scored, standing)
    if renamed is None and crossing.renames:
        return None
    under = None if renamed else _explained_by(crossing.key, n_scored, low, high, standing)
    explains = tuple(
        Explained(kind=key[0], along=key[1], level=named[key], log_e=value)
        for key, value in sorted(log_e.items(), key=lambda item: -item[1])
        if under is None and key != crossing.key and value >= LISTED_LOG_E and can_explain(crossing.key, key)
    )
    return Alarm(
        kind=crossing.key[0],
        along=crossing.key[1],
        index=index,
        log_e=log_e[crossing.key],
        lead=under is None,
        level=level,
        since=since,
        since_low=low,
        since_high=high,
        threshold=crossing.threshold,
        log_mean=log_mean,
        n_scored=n_scored,
        explains=explains,
        under=under,
        replaces=renamed,
    )


def _warning_taken_over(
    key: Key, log_e: Mapping[Key, float], history: History, n_scored: int, standing: Sequence[Alarm]
) -> Key | None:
    """Name the newest standing leader whose warning a cycle explains too, and in fewer parts.

    The cycle's evidence is that over all runs looked back on, also those before it was bet on.
    """
    leader = next((one.key for one in reversed(standing) if one.lead and can_take_over(key, one.key)), None)
    if leader is None:
        return None
    window = np.arange(max(0, n_scored - N_RUNS_DATED), n_scored)
    scored = _block(history.z[history.index[window]], window, history, *key)
    shown = float(log_weight_of_bets(ClockCycle(n_periods=0.0).log_bets(scored))[0])
    return leader if max(shown, log_e[key]) >= TAKE_OVER_SHARE * log_e[leader] else None


def _explained_by(key: Key, n_scored: int, low: int, high: int, standing: Sequence[Alarm]) -> Key | None:
    """Say under which standing leader the alarm belongs."""
    for leader in reversed([alarm for alarm in standing if alarm.lead]):
        soon = n_scored - leader.n_scored <= N_RUNS_SOON
        same_start = low <= leader.since_high and high >= leader.since_low
        lasting = leader.kind in LASTING_KINDS
        if can_explain(leader.key, key) and (soon or same_start or lasting):
            return leader.key
    return None


def _level(key: Key, at: int, book: Book, series: ScoredSeries, n_scored: int) -> str | None:
    """Name the level with the largest evidence of its own; for `batch`, the largest standardised mean."""
    history, levels = series.history, series.levels
    if key[1] not in levels:
        return None
    evidence = book.level_log_wealth(key, at)
    if evidence is None:
        window = np.arange(max(0, n_scored - N_RUNS_DATED), n_scored)
        code = history.codes(key[1])[window]
        total = np.bincount(code, weights=history.z[history.index[window]])
        evidence = total**2 / np.maximum(np.bincount(code), 1)
    return list(levels[key[1]])[int(np.argmax(evidence))]


def _dates(
    key: Key, level: str | None, history: History, levels: Mapping[str, LevelCodes], n_scored: int
) -> tuple[int, int, int]:
    """Date the start from the scores up to the alarm, as indices of runs."""
    window = np.arange(max(0, n_scored - N_RUNS_DATED), n_scored)
    kind, along = key
    if level is not None and kind != "batch":
        window = window[history.codes(along)[window] == levels[along][level]]
    index = history.index[window]
    z = history.z[index]
    if kind == "drift":
        weight = log_weight_of_shift(z)
    elif kind == "spread":
        weight = log_weight_of_spread(z)
    else:
        bets = fresh_bets(kind, along, within_one_level=level is not None)
        weight = log_weight_of_bets(bets.log_bets(_block(z, window, history, kind, along)))
    # Where the first run looked at cannot be excluded, no earlier one can.
    since, low, high = (int(index[at]) if at else 0 for at in starts_not_excluded(weight))
    return since, low, high


def _block(z: FloatArray, window: IntArray, history: History, kind: str, along: str) -> ScoredBlock:
    groups = {}
    if kind == "batch":
        code = history.codes(along)[window].astype(np.int64)
        groups[along] = group(code, np.zeros(int(code.max()) + 1, dtype=np.int64))
    parent_z, parent_reliability = history.parent_scores(window)
    return ScoredBlock(
        z=z,
        reliability=history.reliability[history.index[window]],
        count=np.arange(1, z.size + 1),
        times=history.times[window],
        parent_z=parent_z,
        parent_reliability=parent_reliability,
        groups=groups,
    )
