"""What the sequential audit bets on: every grid, weight and limit that decides, in one place."""

from __future__ import annotations

from typing import Final

SERIAL_PHI: Final = (-0.4, 0.3, 0.6, 0.85)
"""Coefficients of the latent AR(1) signal, a run. In a trial over 13 kinds of dependence these four with two
shares alarmed as soon as, or sooner than, {-.6, -.3, .3, .6, .85} with {.35, .7, 1}, at half the cost."""

SERIAL_SHARE: Final = (0.5, 1.0)
"""Share of a score's variance that the signal has; the rest is noise of the single run."""

DRIFT_PHI_ORDER: Final = (0.97, 0.99, 0.997)
"""Coefficients of a slow signal along the whole order: memories of 33, 100 and 333 runs."""

DRIFT_PHI_LEVEL: Final = (0.97, 0.99)
"""The same within a level, whose own runs are fewer."""

DRIFT_SHARE: Final = (0.03, 0.1, 0.3, 0.6)
"""Share of variance of a slow signal: standard deviations of 0.17, 0.32, 0.55 and 0.77 of a score's."""

BATCH_SHARE: Final = (0.03, 0.1, 0.3)
"""Intraclass correlations bet on by `batch`."""

BATCH_WINDOW: Final = 200
"""Scored runs; memory of the overall level that is taken off before a level's effect is learned."""

CLOCK_PERIOD_S: Final = (86_400.0, 604_800.0)
"""Seconds: a day and a week, the periods of machine rooms and of people."""

CLOCK_VARIANCE: Final = (0.03, 0.15, 0.6)
"""Prior variances of the sine and of the cosine's coefficient."""

CLOCK_N_PERIODS: Final = 3
"""Periods that the runs must span before `clock` bets: two days show no cycle."""

SPREAD_SCALE: Final = (0.6, 0.8, 1.25, 1.6)
"""Ratios of the standard deviation to the reference's."""

LINEAGE_PHI: Final = (-0.6, -0.3, 0.3, 0.6, 0.85)
"""Correlations of a run's score with its parent's."""

SINGLE_LEVEL_MASS: Final = 0.5
"""Share of a nuisance's mass on "one level alone"; the rest is on "every level has its own"."""

FIRST_START_MASS: Final[dict[str, float]] = {
    "serial": 0.5,
    "drift": 0.25,
    "spread": 0.25,
    "batch": 0.8,
    "clock": 0.8,
    "lineage": 0.8,
}
"""Mass of the bet that starts at the first scored run; later starts share the rest. Levels, cycles and
restarts have their effects from the beginning; drifts and spreads begin at some time."""

START_NORM: Final = 1.3064
"""Not less than the sum over t >= 1 of 1 / ((t + 1) ln(t + 2)^2); held by a test."""
