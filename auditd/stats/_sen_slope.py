"""Sen's slope: chosen ranks among the slopes of all pairs, in O(n log n) a look.

Few values: all slopes are held. Many: the rank of a slope b among those of all pairs follows from Kendall's S
of x − b t, and b is searched for, starting from the slopes of random pairs.
"""

from __future__ import annotations

import math

import numpy as np

from auditd.stats._inversions import count_inversions
from auditd.stats._validate import Floats

# Up to here all slopes are held: 2 million of them, 16 MB.
N_DIRECT_MAX = 2000
# Random pairs that give the first bracket, and their seed: a fixed one, so that a result can be repeated.
N_SAMPLED_PAIRS = 2_000_000
SAMPLE_SEED = 19680101
BRACKET_ERRORS = 4.0
# The search ends when S is within this share of its standard deviation under the null, so that a slope is in
# error by a thousandth of its standard error, or when the bracket reaches the rounding of its ends.
SCORE_SHARE = 1e-3
RELATIVE_WIDTH = 1e-14
MAX_SECANTS = 4
MAX_LOOKS = 60


def kendall_score(times: Floats, x: Floats) -> int:
    """Kendall's S: pairs that rise less pairs that fall; equal times or values count zero. Times ascend."""
    n = x.size
    if np.all(times[1:] > times[:-1]):
        order = np.argsort(x, kind="stable")
        ranks = np.empty(n, dtype=np.int64)
        ranks[order] = np.arange(n)
        return n * (n - 1) // 2 - _equal_pairs(x[order]) - 2 * count_inversions(ranks)
    return _score_with_tied_times(times, x)


def _score_with_tied_times(times: Floats, x: Floats) -> int:
    from scipy.stats import kendalltau

    n = x.size
    tau = float(kendalltau(times, x, method="asymptotic").statistic) if np.ptp(x) > 0.0 else 0.0
    pairs = 0.5 * n * (n - 1.0)
    return round(tau * math.sqrt(pairs - tied_pairs(times)) * math.sqrt(pairs - tied_pairs(x)))


def _equal_pairs(ascending: Floats) -> int:
    """Number of pairs of equal values among sorted ones."""
    starts = np.flatnonzero(np.concatenate(([True], ascending[1:] != ascending[:-1], [True])))
    sizes = np.diff(starts)
    return int(np.sum(sizes * (sizes - 1))) // 2


def tied_pairs(values: Floats) -> float:
    """Number of pairs of equal values."""
    sizes = tie_sizes(values)
    return float(np.sum(sizes * (sizes - 1.0)) / 2.0)


def tie_sizes(values: Floats) -> Floats:
    """Sizes of the sets of equal values, those of one value left out."""
    sizes = np.unique_counts(values).counts.astype(np.float64)
    return np.asarray(sizes[sizes > 1.0])


def slopes_at(times: Floats, x: Floats, ranks: tuple[int, ...]) -> list[float]:
    """The slopes of the given ranks (from 0) among all pairs of different times."""
    if x.size <= N_DIRECT_MAX:
        slopes = all_slopes(times, x)
        slopes.partition(sorted(set(ranks)))
        return [float(slopes[rank]) for rank in ranks]
    sample = _sampled_slopes(times, x)
    found = {rank: _searched(times, x, rank, sample) for rank in sorted(set(ranks))}
    return [found[rank] for rank in ranks]


def middle_ranks(times: Floats) -> tuple[int, int]:
    """The ranks whose slopes' mean is the median; one and the same where slopes are searched for."""
    total = n_slopes(times)
    return (total - 1) // 2 if times.size <= N_DIRECT_MAX else total // 2, total // 2


def n_slopes(times: Floats) -> int:
    """Number of pairs of different times."""
    return times.size * (times.size - 1) // 2 - _equal_pairs(times)


def all_slopes(times: Floats, x: Floats) -> Floats:
    """Slopes of all pairs of different times, unsorted."""
    first, second = np.triu_indices(x.size, 1)
    steps = times[second] - times[first]
    rises = x[second] - x[first]
    if steps.min() == 0.0:
        rises, steps = rises[steps > 0.0], steps[steps > 0.0]
    return np.asarray(rises / steps)


def _searched(times: Floats, x: Floats, rank: int, sample: Floats) -> float:
    """The slope b at which Kendall's S of x − b t falls through the value that belongs to the rank."""
    total = n_slopes(times)
    wanted = float(total - 2 * rank - 1)
    enough = SCORE_SHARE * np.sqrt(x.size**3 / 9.0)
    share = (rank + 0.5) / total
    error = float(np.sqrt(max(share * (1.0 - share), 1e-9) / sample.size))
    around = np.clip([share - BRACKET_ERRORS * error, share, share + BRACKET_ERRORS * error], 0.0, 1.0)
    low, at, high = (float(slope) for slope in np.quantile(sample, around))
    at, f_at = _secant(times, x, wanted, at, (high - low) / (4.0 * BRACKET_ERRORS * error * total), enough)
    if abs(f_at) <= enough:
        return at
    bracket = _widened(times, x, wanted, low, high)
    low, high = _narrowed(times, x, wanted, bracket, enough)
    inside = sample[(sample >= low) & (sample <= high)]
    return float(inside[inside.size // 2]) if inside.size else 0.5 * (low + high)


def _secant(
    times: Floats, x: Floats, wanted: float, start: float, per_pair: float, enough: float
) -> tuple[float, float]:
    """A few secant steps, the first one by the sampled change of slope per unit of S."""
    at, f_at = start, _excess(times, x, start, wanted)
    for _ in range(MAX_SECANTS):
        if abs(f_at) <= enough or per_pair <= 0.0:
            break
        following = at + f_at * per_pair
        f_following = _excess(times, x, following, wanted)
        per_pair = (following - at) / (f_at - f_following) if f_at != f_following else 0.0
        at, f_at = following, f_following
    return at, f_at


def _widened(
    times: Floats, x: Floats, wanted: float, low: float, high: float
) -> tuple[float, float, float, float]:
    """A bracket with S above the wanted value at its low end and below at its high end."""
    step = max(high - low, np.finfo(float).eps * max(abs(low), abs(high), float(np.ptp(x) / np.ptp(times))))
    low, high = low - 0.01 * step, high + 0.01 * step
    f_low, f_high = _excess(times, x, low, wanted), _excess(times, x, high, wanted)
    while f_low < 0.0:
        step *= 2.0
        low, high, f_high = low - step, low, f_low
        f_low = _excess(times, x, low, wanted)
    while f_high > 0.0:
        step *= 2.0
        low, high, f_low = high, high + step, f_high
        f_high = _excess(times, x, high, wanted)
    return low, high, f_low, f_high


def _narrowed(
    times: Floats, x: Floats, wanted: float, bracket: tuple[float, float, float, float], enough: float
) -> tuple[float, float]:
    """False position with halved weights (Illinois), and plain halving where S jumps over many ties."""
    low, high, f_low, f_high = bracket
    last_side = 0
    for look in range(MAX_LOOKS):
        width = high - low
        if width <= RELATIVE_WIDTH * max(abs(low), abs(high), float(np.ptp(x) / np.ptp(times))):
            break
        at = 0.5 * (low + high)
        if look % 3 != 2 and f_low > f_high:
            at = min(max(low + width * f_low / (f_low - f_high), low + 0.01 * width), high - 0.01 * width)
        f_at = _excess(times, x, at, wanted)
        if abs(f_at) <= enough:
            return at, at
        if f_at > 0.0:
            low, f_low = at, f_at
            f_high *= 0.5 if last_side == 1 else 1.0
            last_side = 1
        else:
            high, f_high = at, f_at
            f_low *= 0.5 if last_side == -1 else 1.0
            last_side = -1
    return low, high


def _excess(times: Floats, x: Floats, slope: float, wanted: float) -> float:
    """How far S of x − slope · t is above the wanted one; it falls as the slope rises."""
    return float(kendall_score(times, x - slope * times)) - wanted


def _sampled_slopes(times: Floats, x: Floats) -> Floats:
    rng = np.random.default_rng(SAMPLE_SEED)
    first = rng.integers(0, x.size, N_SAMPLED_PAIRS)
    second = rng.integers(0, x.size, N_SAMPLED_PAIRS)
    apart = times[first] != times[second]
    first, second = first[apart], second[apart]
    return np.sort((x[second] - x[first]) / (times[second] - times[first]))
