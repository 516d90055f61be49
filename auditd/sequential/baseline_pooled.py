"""`pooled`: each run's deviation from the earlier mean of its cell, ranked among those of all cells."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.sequential.levels import grown

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


class PooledBaseline:
    """Recursive residuals (y − mean of m earlier runs of the cell)·√(m/(m+1)).

    Independent and N(0, σ²) when errors are Gaussian with one variance in all cells; then ranks are exact.

    References
    ----------
    Brown, Durbin & Evans (1975), Journal of the Royal Statistical Society B 37, section 2.2.
    """

    def __init__(self) -> None:
        self._n = np.zeros(0)
        self._origin = np.zeros(0)
        self._sum = np.zeros(0)

    def residuals(self, values: FloatArray, cells: IntArray) -> tuple[FloatArray, FloatArray]:
        """Give the next runs' residuals and the share of each that is the run's own; the runs then join.

        A cell's first run has NaN and 0. The own share m/(m+1) is the squared correlation with the error.
        """
        n_cells = int(cells.max(initial=-1)) + 1
        self._n, self._sum = grown(self._n, n_cells, 0.0), grown(self._sum, n_cells, 0.0)
        self._origin = grown(self._origin, n_cells, np.nan)
        result, share = np.empty(values.size), np.empty(values.size)
        by_cell = np.argsort(cells, kind="stable")
        in_order = cells[by_cell]
        first = (
            np.flatnonzero(np.append(True, in_order[1:] != in_order[:-1]))
            if values.size
            else np.zeros(0, int)
        )
        for at in np.split(by_cell, first[1:]):
            if at.size:
                result[at], share[at] = self._one_cell(values[at], int(cells[at[0]]))
        return result, share

    def _one_cell(self, values: FloatArray, cell: int) -> tuple[FloatArray, FloatArray]:
        if self._n[cell] == 0:
            self._origin[cell] = values[0]
        deviation = values - self._origin[cell]  # near zero, so that sums lose no digits
        # Adding one after the other, as for single runs: any split into blocks gives the same bits.
        sums = np.cumsum(np.append(self._sum[cell], deviation))
        m = self._n[cell] + np.arange(values.size)
        share = m / (m + 1.0)
        residual = (deviation - sums[:-1] / np.maximum(m, 1.0)) * np.sqrt(share)
        self._n[cell] += values.size
        self._sum[cell] = sums[-1]
        return np.where(m > 0, residual, np.nan), share
