"""What the sequential audit would have shown by now, in closed form, for a status line."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from statistics import NormalDist

from auditd.errors import BadInput

# What a bet loses, in log e, against one that knew kind and size beforehand: the mixtures over kinds of
# alternative, over starts and over sizes, and the ranks' reference that is still being learnt. Fitted to the
# probability 0.8 in simulations of `auditd.sequential.replay`: 150 campaigns for each of several sizes, 240
# to 1,600 runs, 4 to 16 hosts, 7 to 28 e-processes.
LOSS_SERIAL = 3.0
LOSS_DRIFT = 3.0
LOSS_BATCH = 1.0
RUNS_PER_DRIFT_LOSS = 400.0
"""Runs for each further unit that `drift` loses: its bets remember some 330 runs (a coefficient of .997), so
that they cannot use the whole of a long straight line."""

SERIAL_BETS = (0.105, 0.21, 0.3, 0.42, 0.6, 0.85)
"""Correlations of neighbours that the serial family bets on: coefficient × share of its grid (φ of .3, .6,
.85 and s of .35, .7, 1). Ones weaker than half of the smallest gain nothing, however long the campaign."""

LARGEST_AR, LARGEST_ICC, LARGEST_DRIFT = 0.95, 0.95, 10.0
"""Beyond these the answer is None: the design would have shown no such dependence for sure."""
N_BISECTIONS = 60


def would_see(
    n_scored: int,
    *,
    n_asked: int,
    level_counts: Mapping[str, Sequence[int]] | None = None,
    alarm_budget: float = 0.05,
    probability: float = 0.8,
) -> dict[str, float | None]:
    """Return the smallest dependence that would have raised an alarm by now with a stated probability.

    Parameters
    ----------
    n_scored : runs of the response that were scored (each cell's first is not).
    n_asked : K, the e-processes that share the budget over all responses (`Replay.n_asked`).
    level_counts : scored runs of each level, by nuisance.
    alarm_budget : of the epoch.
    probability : of the alarm.

    Returns
    -------
    dict
        `drift`: rise in a straight line over all runs so far, in standard deviations of a run; `icc`: the
        intraclass correlation along the nuisance in which it shows soonest; `ar`: the correlation of
        neighbours in the order. None where even a strong one would not have been seen for sure.

    Raises
    ------
    BadInput : counts below zero, no e-process, a budget or probability outside of (0, 1).

    Notes
    -----
    An approximation, within about 15 % of what simulation gives for 240 to 6,000 runs; below some 100 runs,
    and for few levels of very unequal counts, it is cruder. The log e-value against a known alternative of
    noncentrality h is N(h²/2, h²); it must reach log(K / budget) and what the mixtures lose. A drift of size
    δ has h² = n δ² / 12. A bet on the correlation b of neighbours gains N(n (b φ − b²/2), n b²) from an AR(1)
    with coefficient φ. For L levels of m runs the log Bayes factor of the level effects is
    (Q − (L−1)(1 + log(Q / (L−1)))) / 2, with Q distributed as (1 + m θ) times chi-squared on L − 1 degrees of
    freedom and θ the ratio of the variances between and within levels.
    Assumes one dependence at a time, present from the first run on. A later one is seen later than this says.

    References
    ----------
    The noncentral argument is that of Wald (1947), Sequential Analysis, chapter 3; the Bayes factor of a
    balanced one-way layout follows Box & Tiao (1973), Bayesian Inference in Statistical Analysis, chapter 5.
    """
    _check_power(n_scored, n_asked, alarm_budget, probability)
    needed = math.log(n_asked / alarm_budget)
    z = NormalDist().inv_cdf(probability)
    drift_loss = LOSS_DRIFT + n_scored / RUNS_PER_DRIFT_LOSS
    drift = _smallest_drift(n_scored, _needed_noncentrality(needed + drift_loss, z))
    counts = [[int(m) for m in own if m > 0] for own in (level_counts or {}).values()]
    seen = [_smallest_icc(own, needed + LOSS_BATCH, probability) for own in counts if len(own) > 1]
    return {
        "drift": _below(LARGEST_DRIFT, drift),
        "icc": _below(LARGEST_ICC, min(seen, default=math.inf)),
        "ar": _below(LARGEST_AR, _smallest_ar(n_scored, needed + LOSS_SERIAL, z)),
    }


def _needed_noncentrality(log_e: float, z: float) -> float:
    """Return h with P(N(h²/2, h²) ≥ log_e) = Φ(z)."""
    return max(0.0, z + math.sqrt(z * z + 2 * log_e))


def _smallest_drift(n: int, h: float) -> float:
    return h * math.sqrt(12 / n) if n > 0 else math.inf


def _smallest_ar(n: int, log_e: float, z: float) -> float:
    """Return the coefficient at which the best of the bets reaches `log_e`."""
    if n < 1:
        return math.inf
    return min(bet / 2 + z / math.sqrt(n) + log_e / (n * bet) for bet in SERIAL_BETS)


def _smallest_icc(counts: Sequence[int], log_e: float, probability: float) -> float:
    """Return the intraclass correlation, with unequal counts entering by their usual effective number."""
    from scipy.special import chdtri

    n, df = sum(counts), len(counts) - 1
    m = (n - sum(count * count for count in counts) / n) / df
    quantile = float(chdtri(df, probability))  # exceeded with the stated probability
    ratio = (_quadratic_needed(df, log_e) / quantile - 1) / m
    return ratio / (1 + ratio) if ratio > 0 else 0.0


def _quadratic_needed(df: int, log_e: float) -> float:
    """Return Q > df with (Q − df (1 + log(Q / df))) / 2 = log_e, by bisection."""
    low, high = float(df), df + 4 * log_e + 4 * math.sqrt(df * log_e) + 10
    for _ in range(N_BISECTIONS):
        middle = (low + high) / 2
        reached = (middle - df * (1 + math.log(middle / df))) / 2 >= log_e
        low, high = (low, middle) if reached else (middle, high)
    return high


def _below(largest: float, value: float) -> float | None:
    return value if value <= largest else None


def _check_power(n_scored: int, n_asked: int, alarm_budget: float, probability: float) -> None:
    if n_scored < 0 or n_asked < 1:
        raise BadInput(f"{n_scored} runs and {n_asked} e-processes: counts from 0 and from 1 are expected")
    if not 0 < alarm_budget < 1 or not 0 < probability < 1:
        raise BadInput(f"budget {alarm_budget} and probability {probability} must lie between 0 and 1")
