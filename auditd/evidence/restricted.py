"""The restricted likelihood of AR(1) errors with random effects, over a grid, and one contrast under it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Floats
from auditd.evidence.moments import Moments

FIXED_RIDGE = 1e-7  # of the mean diagonal: settles aliased block columns without moving an estimable contrast


@dataclass(frozen=True, kw_only=True)
class Fits:
    """Fits on a grid of G parameter values.

    loglik (G,) restricted log-likelihood; estimate (G,) of the contrast; unit (G,) its variance ÷
    innovation variance; sigma2 (G,) innovation variance; coefficients (G, k); leverage (G, k) = A⁻¹c.
    """

    loglik: Floats
    estimate: Floats
    unit: Floats
    sigma2: Floats
    coefficients: Floats
    leverage: Floats


def evaluate(moments: Moments, c: Floats, phi: Floats, ridge: Floats, n_fixed: int) -> Fits:
    """Fit by Henderson's mixed-model equations at each grid point.

    Parameters
    ----------
    c : (k,) the contrast.
    phi : (G,) coefficient of the AR(1).
    ridge : (G, k) innovation variance ÷ variance of the random effect of each column; 0 for fixed columns.
    n_fixed : columns (or their rank) that cost a degree of freedom.

    References
    ----------
    Henderson (1975), Biometrics 31:423-447; Harville (1977), JASA 72:320-338 (restricted likelihood).
    """
    f = phi[:, None]
    s0, s1, s2 = moments.matrix
    a = s0 - f[:, :, None] * s1 + (f * f)[:, :, None] * s2
    index = np.arange(a.shape[1])
    a[:, index, index] += ridge
    right = moments.right[0] - f * moments.right[1] + f * f * moments.right[2]
    y0, y1, y2 = moments.square
    square = y0 - phi * y1 + phi * phi * y2
    solved = np.linalg.solve(a, np.stack((right, np.broadcast_to(c, right.shape)), axis=-1))
    rest = np.maximum(square - (right * solved[:, :, 0]).sum(1), 1e-14 * np.maximum(square, 1e-300))
    df = moments.n - n_fixed
    random = np.where(ridge > 0, ridge, 1.0)
    loglik = (
        -0.5 * np.linalg.slogdet(a)[1]
        + 0.5 * np.log(random).sum(1)
        + 0.5 * moments.n_starts * np.log1p(-phi * phi)
        - 0.5 * df * np.log(rest)
    )
    return Fits(
        loglik=loglik,
        estimate=solved[:, :, 0] @ c,
        unit=solved[:, :, 1] @ c,
        sigma2=rest / df,
        coefficients=np.asarray(solved[:, :, 0], dtype=np.float64),
        leverage=np.asarray(solved[:, :, 1], dtype=np.float64),
    )
