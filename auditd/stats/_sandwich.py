"""The sandwich form of a covariance matrix: bread · meat · bread."""

from __future__ import annotations

import numpy as np

from auditd.stats._validate import Floats


def bread(design: Floats) -> tuple[Floats, Floats]:
    """(X'X)⁻¹ of the columns scaled to length one, and the lengths (p,)."""
    scale = np.sqrt(np.einsum("ij,ij->j", design, design))
    triangle = np.linalg.qr(design / scale, mode="r")
    inverse = np.linalg.inv(triangle)
    return inverse @ inverse.T, scale


def sandwich(unscaled: Floats, meat: Floats, scale: Floats) -> Floats:
    """The covariance in the columns' own units, exactly symmetric."""
    covariance = unscaled @ meat @ unscaled / np.outer(scale, scale)
    return np.asarray(0.5 * (covariance + covariance.T))
