"""How likely two runs' results agree to the last digit by chance, estimated from the data."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np

MAX_CHANCE = 1e-6
"""Probability of any chance equality in the campaign, over all pairs of runs, from which on equal results
say nothing (the project's own bar)."""
N_DIFFERENCES_KEPT = 512
"""Differences between runs of one cell from which scale, grid and correlation are estimated."""
N_DIFFERENCES_NEEDED = 8
"""Differences before which no scale is estimated, and no equality judged ..."""
N_EQUAL_ENOUGH = 10
"""... unless so many runs were equal with nothing differing beside them: then the digits alone decide."""
N_DIGITS_ENOUGH = 12
"""Significant digits of one response from which they do; no fraction of small numbers ..."""
MAX_DENOMINATOR = 5000
"""... such as 5/7 or 1020/1319, whose digits never end, is that."""
N_VALUES_KEPT = 2048
"""Values of each response that later ones are compared with, for how often single values come back."""
N_BETWEEN_LESSONS = 16
"""Once so many values are kept, one run in sixteen is learnt from: the others would teach the same."""
TWO_ROOT_PI = 2 * math.sqrt(math.pi)
"""A normal law of scale s on a grid of step d gives two equal values with probability d / (2 √π s)."""
MEDIAN_OF_DIFFERENCE = 0.6745 * math.sqrt(2)
"""Median of |x − y| for two independent normal values of scale 1."""
GRID_TOLERANCE = 1e-7
"""Share of a response's scale below which a remainder counts as nothing, when its grid is sought."""
MIN_GRID = 1e-5
"""Share of the scale below which a grid that is not decimal cannot be told from none."""


class Resolution:
    """What the responses' own digits and spread make of an equality.

    Differences of successive runs within cells give a robust scale, the grid (accuracies of 1,319 items
    move in steps of 1/1319) and how much of a response the others tell. Values that come back without
    the other responses (zeros, caps) weigh by how often they do. With one response alone, values on a grid
    that is neither decimal nor even (roots of counts) are taken for finer than they are.
    """

    def __init__(self, n_responses: int) -> None:
        self._differences = np.empty((N_DIFFERENCES_KEPT, n_responses))
        self._n_differences = 0
        self._latest: dict[int, tuple[float, ...]] = {}
        self._kept: list[set[float]] = [set() for _ in range(n_responses)]
        self._n_back = [0] * n_responses
        self._n_compared = [0] * n_responses
        self._n = 0
        self._n_unjudged = 0
        self._estimated: tuple[int, tuple[tuple[float, float], ...]] = (0, ())

    def take(self, cell: int, values: tuple[float, ...]) -> None:
        """Learn from one run's results; repeats of earlier results teach nothing and are not given."""
        self._n += 1
        if self._n > N_VALUES_KEPT and self._n % N_BETWEEN_LESSONS:
            return
        for number, (value, kept) in enumerate(zip(values, self._kept, strict=True)):
            self._n_compared[number] += len(kept)
            if value in kept:
                self._n_back[number] += 1
            elif len(kept) < N_VALUES_KEPT:
                kept.add(value)
        before = self._latest.get(cell)
        self._latest[cell] = values
        if before is not None:
            row = self._n_differences % N_DIFFERENCES_KEPT
            self._differences[row] = [a - b for a, b in zip(values, before, strict=True)]
            self._n_differences += 1

    def chance(self, values: tuple[float, ...]) -> float:
        """Return the probability, at most 1, that another run gives these very values by chance."""
        estimates = self._estimates()
        if not estimates:
            self._n_unjudged += 1
            return 0.0 if self._n_unjudged >= N_EQUAL_ENOUGH and any(map(_is_fine, values)) else 1.0
        chance = 1.0
        for number, (value, (scale, grid)) in enumerate(zip(values, estimates, strict=True)):
            by_grid = max(_step(value), grid) / (TWO_ROOT_PI * scale) if scale > 0 else 1.0
            by_count = self._n_back[number] / max(1, self._n_compared[number])
            chance *= min(1.0, max(by_grid, by_count))
        return chance

    def _estimates(self) -> tuple[tuple[float, float], ...]:
        """Return each response's scale, given those before it, and grid; empty while too few runs "
        "are known.
        """
        if self._n_differences < N_DIFFERENCES_NEEDED:
            return ()
        known = self._n_differences.bit_length()  # estimated anew at each doubling
        if self._estimated[0] != known:
            rows = self._differences[: min(self._n_differences, N_DIFFERENCES_KEPT)]
            self._estimated = (known, _conditional(rows))
        return self._estimated[1]


def _conditional(
    differences: np.ndarray[tuple[int, int], np.dtype[np.float64]],
) -> tuple[tuple[float, float], ...]:
    """Return robust scales times the root of the share that the responses before leave open, and grids."""
    estimates: list[tuple[float, float]] = []
    columns: list[np.ndarray[tuple[int], np.dtype[np.float64]]] = []
    for difference in differences.T:
        size = np.abs(difference)
        scale = float(np.median(size[size > 0])) if (size > 0).any() else 0.0
        column = np.clip(difference / (scale or 1.0), -5, 5)
        column -= column.mean()
        whole = float(column @ column)
        rest = column
        if columns:
            given = np.stack(columns, axis=1)
            rest = column - given @ np.linalg.lstsq(given, column, rcond=None)[0]
        left = math.sqrt(float(rest @ rest) / whole) if whole > 0 else 0.0
        columns.append(column)
        estimates.append((scale / MEDIAN_OF_DIFFERENCE * left, _grid(size[size > 0], scale)))
    return tuple(estimates)


def _grid(sizes: np.ndarray[tuple[int], np.dtype[np.float64]], scale: float) -> float:
    """Return the step of an even grid that all differences lie on (Euclid's algorithm), or 0 for none."""
    step = 0.0
    tolerance = GRID_TOLERANCE * scale
    for size in map(float, sizes[:64]):
        a, b = max(size, step), min(size, step)
        while b > tolerance:
            remainder = math.fmod(a, b)
            a, b = b, min(remainder, b - remainder)
        step = a
        if step < MIN_GRID * scale:
            return 0.0
    return step


def _step(value: float) -> float:
    """Return the step of the grid that a value is written on: its last decimal, or the float's spacing."""
    mantissa, _, exponent = repr(value).partition("e")
    decimals = len(mantissa.partition(".")[2].rstrip("0"))
    return max(10.0 ** (int(exponent or 0) - decimals), math.ulp(value))


def _is_fine(value: float) -> bool:
    """Whether a value has many digits and is no fraction of small numbers."""
    digits = repr(value).partition("e")[0].lstrip("-").replace(".", "").strip("0")
    if len(digits) < N_DIGITS_ENOUGH:
        return False
    return not math.isclose(float(Fraction(value).limit_denominator(MAX_DENOMINATOR)), value, rel_tol=1e-13)
