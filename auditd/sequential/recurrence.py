"""Linear recurrences solved over all of a block at once."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

NEGLIGIBLE = 1e-30
"""A product of coefficients below this carries nothing of a score (at most about 8) into a float64 sum."""


def solve_recurrence(coefficient: FloatArray, term: FloatArray) -> FloatArray:
    """Solve a_t = coefficient_t · a_{t−1} + term_t, with a_{−1} = 0, for every row.

    Doubling steps (Hillis & Steele 1986, Communications of the ACM 29): after the k-th, each position has
    gathered the 2^k positions before it. Rows whose memory has faded drop out.

    Parameters
    ----------
    coefficient, term : (rows, n); |coefficient| < 1. A zero coefficient starts a segment anew. Overwritten.

    Returns
    -------
    a : (rows, n)
    """
    n = term.shape[1]
    step = 1
    active: IntArray | None = None
    c, d = coefficient, term
    while step < n:
        d[:, step:] += c[:, step:] * d[:, :-step]
        c[:, step:] *= c[:, :-step].copy()
        c[:, :step] = 0.0
        step *= 2
        reach = np.abs(c).max(axis=1) > NEGLIGIBLE
        if not reach.all():
            if active is None:
                active = np.arange(term.shape[0])
            else:
                term[active] = d
            active = active[reach]
            c, d = c[reach], term[active]
    if active is not None:
        term[active] = d
    return term
