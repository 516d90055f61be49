"""Laws of a run's error, each a monotone map of a standard normal latent value.

Since the maps are monotone, an effect of a stated size on the latent scale has the same strength under every
law for everything that looks at ranks.
"""

from __future__ import annotations

from collections.abc import Callable
from types import MappingProxyType
from typing import TypeAlias

import numpy as np

from auditd.errors import BadInput
from auditd.simulate.simulated import Floats

T_DEGREES = 2.2
"""Degrees of freedom of the heavy-tailed law: finite variance (11), no third moment."""
LOG_SPREAD = 1.0
"""Standard deviation of the logarithm in the lognormal law."""
GRID = 0.5
"""Step of the coarsely rounded law, in standard deviations."""
SPREADS = (0.3, 1.0, 3.0, 10.0)
"""Standard deviations of the cells, in turn, in the law of unequal spreads."""

Law: TypeAlias = Callable[[Floats, np.ndarray], Floats]


def normal_law(z: Floats, cell_codes: np.ndarray) -> Floats:
    """Standard normal errors."""
    del cell_codes
    return z.copy()


def student_law(z: Floats, cell_codes: np.ndarray) -> Floats:
    """Student's t with 2.2 degrees of freedom; the tail is taken from the lower side, where it is exact."""
    from scipy.special import ndtr, stdtrit

    del cell_codes
    tail = np.maximum(ndtr(-np.abs(z)), np.finfo(np.float64).tiny)
    return np.asarray(-np.sign(z) * stdtrit(T_DEGREES, tail), dtype=np.float64)


def lognormal_law(z: Floats, cell_codes: np.ndarray) -> Floats:
    """Lognormal errors about their mean exp(LOG_SPREAD² / 2)."""
    del cell_codes
    return np.asarray(np.exp(LOG_SPREAD * z) - np.exp(LOG_SPREAD**2 / 2), dtype=np.float64)


def unequal_law(z: Floats, cell_codes: np.ndarray) -> Floats:
    """Normal errors whose spread differs between cells by a factor of up to 33."""
    return np.asarray(z * np.asarray(SPREADS)[cell_codes % len(SPREADS)], dtype=np.float64)


def coarse_law(z: Floats, cell_codes: np.ndarray) -> Floats:
    """Normal errors rounded to halves of a standard deviation, so that most are tied."""
    del cell_codes
    return np.asarray(np.round(z / GRID) * GRID, dtype=np.float64)


LAWS: MappingProxyType[str, Law] = MappingProxyType(
    {
        "normal": normal_law,
        "t": student_law,
        "lognormal": lognormal_law,
        "unequal": unequal_law,
        "coarse": coarse_law,
    }
)


def law_named(name: str) -> Law:
    """Return a law by its name; raises BadInput for an unknown one."""
    if name not in LAWS:
        raise BadInput(f"{name!r} is no law; known: {', '.join(LAWS)}")
    return LAWS[name]
