"""Bounds of a probability that was counted."""

from __future__ import annotations

from auditd.errors import BadInput


def clopper_pearson(n_hits: int, n: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the exact two-sided bounds of a probability from `n_hits` of `n` independent trials.

    Raises
    ------
    BadInput : counts out of order, or a confidence outside of (0, 1).

    Assumptions: trials independent with one probability; coverage is at least the stated one, mostly more.

    References
    ----------
    Clopper & Pearson (1934), Biometrika 26, 404–413.
    """
    from scipy.special import betaincinv

    if not 0 <= n_hits <= n or n < 1 or not 0 < confidence < 1:
        raise BadInput(f"{n_hits} of {n} at confidence {confidence}: not a count of trials")
    tail = (1 - confidence) / 2
    low = 0.0 if n_hits == 0 else float(betaincinv(n_hits, n - n_hits + 1, tail))
    high = 1.0 if n_hits == n else float(betaincinv(n_hits + 1, n - n_hits, 1 - tail))
    return low, high
