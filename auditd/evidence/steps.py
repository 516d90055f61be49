"""Steps of a chain's level, told from autocorrelation before the rest is called that.

A chain is halved where its cumulated deviation is largest, and the step is kept where an AR(1) with the
step is far more likely than an AR(1) without, each with its own coefficient; then both halves are asked in
turn. A trend comes out as a staircase.

References
----------
Page (1955), Biometrika 42:523-527 (cumulated deviations); Vostrikova (1981), Soviet Mathematics Doklady
24:55-59 (binary segmentation); Quandt (1960), JASA 55:324-330 (likelihood ratio at an unknown place).
"""

from __future__ import annotations

import numpy as np

from auditd.evidence.chains import along_order
from auditd.evidence.inputs import Floats, Ints
from auditd.evidence.moments import sum_moments
from auditd.evidence.restricted import evaluate

MIN_SEGMENT_RUNS = 8  # runs on each side of a step
MAX_SEGMENTS = 12  # in one chain; more is not a step but a wander, left to the autocorrelation
RATIO = 25.0  # 2·log-likelihood ratio of a step: an AR(1) alone exceeds it in < 0.5 % of chains (simulated)
WHITE_RATIO = 12.0  # squared standardised deviation below which no step can reach RATIO even in white noise
MIN_CHAIN_RUNS = 3 * MIN_SEGMENT_RUNS
PHI_NODES = 1 - 2 * np.linspace(0.22, 0.99, 32) ** 5  # grid of φ from 0.999 down to −0.9, finest near 1


def segments(x: Floats) -> Ints:
    """Starts of the segments of constant level, the first being 0."""
    starts = [0]
    todo = [(0, len(x))]
    while todo and len(starts) < MAX_SEGMENTS:
        low, high = todo.pop(0)
        place = _one_step(x[low:high])
        if place is not None:
            starts.append(low + place)
            todo += [(low, low + place), (low + place, high)]
    return np.array(sorted(starts), dtype=np.int64)


def _one_step(x: Floats) -> int | None:
    """Place of the step in a stretch, or None."""
    m = len(x)
    if m < MIN_CHAIN_RUNS:
        return None
    y = x - x.mean()
    variance = float(y @ y) / m
    if variance <= 0:
        return None
    before = np.arange(MIN_SEGMENT_RUNS, m - MIN_SEGMENT_RUNS + 1)
    cumulated = np.cumsum(y)[before - 1]
    score = cumulated**2 * m / (before * (m - before)) / variance
    best = int(np.argmax(score))
    if score[best] < WHITE_RATIO:
        return None
    place = int(before[best])
    return place if likelihood_ratio(y / variance**0.5, place) > RATIO else None


def likelihood_ratio(y: Floats, place: int) -> float:
    """Twice the log-likelihood ratio of AR(1) with a step at `place` against AR(1) without."""
    code = (np.arange(len(y)) >= place).astype(np.int64)
    two = sum_moments(y, code, np.eye(2), along_order(len(y)))
    one = sum_moments(y, code, np.ones((2, 1)), along_order(len(y)))
    phi = PHI_NODES
    best = []
    for moments in (two, one):
        k = moments.matrix[0].shape[0]
        fits = evaluate(moments, np.ones(k), phi, np.zeros((len(phi), k)), 0)
        best.append(float((0.5 * np.log1p(-phi * phi) - 0.5 * len(y) * np.log(fits.sigma2)).max()))
    return 2 * (best[0] - best[1])
