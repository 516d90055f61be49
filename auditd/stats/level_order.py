"""Whether levels follow each other in random order."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import BadInput, NotTestable
from auditd.stats._results import HypothesisTest
from auditd.stats._validate import Integers, choice, codes, vector

SOURCE = (
    "Wald & Wolfowitz (1940), Annals of Mathematical Statistics 11:147-162; more than two levels: Mood "
    "(1940), same volume, 367-392, and Barton & David (1957), Biometrika 44:168-178"
)
# Up to here all arrangements are counted, by integers of any length: 0.1 s at the limit.
N_EXACT = 200
# Beyond, expected repeats below this many are too few for the normal law; they are then nearly Poisson.
REPEATS_NORMAL = 20.0


@dataclass(frozen=True, kw_only=True)
class LevelOrder(HypothesisTest):
    """Result of `level_order`; the statistic is the z of the number of runs, negative where levels cluster.

    Attributes
    ----------
    n_runs : stretches of one level, in order.
    expected_runs, sd_runs : their mean and standard deviation over all orders.
    method : "exact", "normal" or "poisson": how the p-value was found.
    """

    n_runs: int
    expected_runs: float
    sd_runs: float
    method: str


def level_order(levels: Iterable[Any], order: ArrayLike, *, alternative: str = "two-sided") -> LevelOrder:
    """Test whether the order of the levels is random, by the number of stretches of one level.

    Null hypothesis: every arrangement of the levels in order is equally likely. Alternative: levels cluster
    or alternate ("two-sided"), cluster ("clustered"), or alternate ("alternating").

    Parameters
    ----------
    levels : level of each run, shape (n,), of two levels or more.
    order : what to sort the runs by, shape (n,): positions, sequence numbers or times, all different.
    alternative : "two-sided", "clustered" or "alternating".

    Raises
    ------
    BadInput : another number of levels than of `order`, values that are not finite, or equal ones in `order`.
    NotTestable : fewer than three runs, one level, or no level that occurs twice.

    Notes
    -----
    Conditions on how often each level occurs, and assumes nothing else. A blocked order (every level once in
    each block) alternates more than a random one and may be called so; ask for "clustered" if that is no
    fault. A slow drift in the share of a level shows only weakly: ask `kruskal_wallis(order, levels)` too.
    The exact two-sided p-value is twice the smaller tail.

    References
    ----------
    Wald & Wolfowitz (1940), Annals of Mathematical Statistics 11:147-162. Mood (1940), The distribution
    theory of runs, same volume, 367-392. Barton & David (1957), Multiple runs, Biometrika 44:168-178.
    """
    choice(alternative, "alternative", ("two-sided", "clustered", "alternating"))
    positions = vector(order, "order", n_min=3)
    group, labels = codes(levels, "levels", n=positions.size)
    sizes = np.bincount(group)
    if len(labels) < 2:
        raise NotTestable("at least two levels", f"one, {labels[0]!r}")
    if len(labels) == group.size:
        raise NotTestable("a level that occurs at least twice", f"{len(labels)} levels that occur once")
    n_runs = _n_runs(group, positions)
    mean, sd = _moments(sizes)
    few, many, method = _tails(n_runs, sizes, mean, sd)
    tails = {"clustered": few, "alternating": many, "two-sided": 2.0 * min(few, many)}
    return LevelOrder(
        statistic=(n_runs - mean) / sd, n=group.size, source=SOURCE, pvalue=min(1.0, tails[alternative]),
        null="every order of the levels is equally likely", n_runs=n_runs, expected_runs=mean, sd_runs=sd,
        method=method,
    )  # fmt: skip


def _n_runs(group: Integers, positions: np.ndarray[Any, np.dtype[np.float64]]) -> int:
    by_position = np.argsort(positions, kind="stable")
    n_equal = int(np.count_nonzero(np.diff(positions[by_position]) == 0.0))
    if n_equal:
        raise BadInput(f"order has {n_equal} values that repeat another; give a sequence without ties")
    ordered = group[by_position]
    return 1 + int(np.count_nonzero(ordered[1:] != ordered[:-1]))


def _moments(sizes: Integers) -> tuple[float, float]:
    """Mean and standard deviation of the number of runs over all arrangements, in whole numbers."""
    counts, how_many = np.unique(sizes, return_counts=True)
    pairs = [(int(s), int(m)) for s, m in zip(counts, how_many, strict=True)]
    n = sum(s * m for s, m in pairs)
    squares, cubes = sum(m * s**2 for s, m in pairs), sum(m * s**3 for s, m in pairs)
    mean = (n * (n + 1) - squares) / n
    variance = squares * (squares + n * (n + 1)) - 2 * n * cubes - n**3
    return mean, math.sqrt(variance / (n * n * (n - 1)))


def _tails(n_runs: int, sizes: Integers, mean: float, sd: float) -> tuple[float, float, str]:
    """P(as few runs or fewer), P(as many or more), and how they were found."""
    from scipy.special import ndtr, pdtr, pdtrc

    n = int(sizes.sum())
    if n <= N_EXACT:
        return *_exact_tails(n_runs, sizes.tolist()), "exact"
    repeats, expected = n - n_runs, n - mean
    if expected < REPEATS_NORMAL:
        few = float(pdtrc(repeats - 1, expected)) if repeats else 1.0
        return few, float(pdtr(repeats, expected)), "poisson"
    # Half a step towards the mean: the number of runs is whole.
    few, many = float(ndtr((n_runs + 0.5 - mean) / sd)), float(ndtr((mean - n_runs + 0.5) / sd))
    return few, many, "normal"


def _exact_tails(n_runs: int, sizes: list[int]) -> tuple[float, float]:
    counts = arrangements(sizes)
    total = sum(counts)
    return sum(counts[: n_runs + 1]) / total, sum(counts[n_runs:]) / total


def arrangements(sizes: list[int]) -> list[int]:
    """The number of arrangements of levels of these sizes that have 0, 1, … n runs.

    Cutting each level into any number of pieces and ordering the pieces counts an arrangement of r runs
    C(n − r, m − r) times among those of m pieces; inclusion and exclusion gives it back.
    """
    n = sum(sizes)
    ordered = [1]
    for size in sizes:
        pieces = [0, *(math.comb(size - 1, m - 1) for m in range(1, size + 1))]
        product = [0] * (len(ordered) + size)
        for i, left in enumerate(ordered):
            if left:
                for j in range(1, size + 1):
                    product[i + j] += left * pieces[j] * math.comb(i + j, j)
        ordered = product
    return [
        sum((-1) ** (r - m) * math.comb(n - m, r - m) * ordered[m] for m in range(r + 1))
        for r in range(n + 1)
    ]  # fmt: skip
