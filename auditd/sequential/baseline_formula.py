"""`formula`: recursive least-squares residuals of a linear model, ranked among all earlier ones."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput

FloatArray = npt.NDArray[np.float64]

RELATIVE_RANK_TOLERANCE = 1e-10
"""Eigenvalues of the scaled cross-product below this share of the largest count as zero."""

OUTSIDE_SPAN = 1e-8
"""Share of a row's squared length outside the span of earlier rows above which it cannot be predicted."""


class FormulaBaseline:
    """Recursive residuals (y_t − x_t'β_{t−1}) / √(1 + x_t'(X'X)⁻¹x_t).

    A run whose row lies outside the span of the earlier rows cannot be predicted and has none. Exact ranks
    for Gaussian errors of one variance; a misfit of the formula looks like drift unless levels come in random
    order.

    References
    ----------
    Brown, Durbin & Evans (1975), Journal of the Royal Statistical Society B 37, section 2.2, equation 2.
    """

    def __init__(self) -> None:
        self._cross = np.zeros((0, 0))
        self._moment = np.zeros(0)
        self._origin = np.nan

    def residuals(self, values: FloatArray, design: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Give the next runs' residuals and the share of each that is the run's own; the runs then join.

        A run that cannot be predicted has NaN. The own share 1/(1 + leverage) is the squared correlation with
        the error.

        Parameters
        ----------
        values : (n,) finite values.
        design : (n, p) rows.
        """
        n, p = design.shape
        if n == 0:
            return np.empty(0), np.empty(0)
        if self._cross.shape[0] == 0:
            self._cross, self._moment = np.zeros((p, p)), np.zeros(p)
        if self._cross.shape[0] != p:
            raise BadInput(f"design has {p} columns, the runs before had {self._cross.shape[0]}")
        crosses = np.cumsum(
            np.concatenate((self._cross[None], design[:, :, None] * design[:, None, :])), axis=0
        )
        moments = np.cumsum(np.concatenate((self._moment[None], design * values[:, None])), axis=0)
        self._cross, self._moment = crosses[-1].copy(), moments[-1].copy()
        return self._predict(values, design, crosses[:-1], moments[:-1])

    @staticmethod
    def _predict(
        values: FloatArray, design: FloatArray, cross: FloatArray, moment: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Predict each run from the rows before it, through the eigenvectors of the scaled cross-product."""
        scale = np.sqrt(np.einsum("npp->np", cross))
        scale = np.where(scale > 0, scale, 1.0)
        eigenvalue, vector = np.linalg.eigh(cross / (scale[:, :, None] * scale[:, None, :]))
        kept = eigenvalue > RELATIVE_RANK_TOLERANCE * np.maximum(eigenvalue[:, -1:], 1.0)
        row = np.einsum("npk,np->nk", vector, design / scale)
        inverse = np.where(kept, 1.0 / np.where(kept, eigenvalue, 1.0), 0.0)
        projected = np.einsum("npk,np->nk", vector, moment / scale) * inverse
        outside = np.einsum("nk,nk->n", np.where(kept, 0.0, row), row)
        length = np.einsum("nk,nk->n", row, row)
        predicted = np.einsum("nk,nk->n", row, projected)
        leverage = np.einsum("nk,nk->n", row * inverse, row)
        share = 1.0 / (1.0 + leverage)
        residual = (values - predicted) * np.sqrt(share)
        return np.where(outside <= OUTSIDE_SPAN * length, residual, np.nan), share
