"""Autoregression of a higher order, for chains that an AR(1) does not whiten.

References
----------
Ljung & Box (1978), Biometrika 65:297-303; Hurvich & Tsai (1989), Biometrika 76:297-307 (AICc); Brockwell &
Davis (1991), Time Series: Theory and Methods, section 8.1 (Yule-Walker), section 3.3 (autocorrelations of
an autoregression).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.chains import Chains, Stretches
from auditd.evidence.inputs import Floats, Ints

WHITE_LEVEL = 0.01  # level of the test of whiteness; a rarer false call costs more than a small misfit
MIN_RUNS = 60  # runs from which a higher order can be told from an AR(1)
MAX_ORDER = 12
RUNS_A_LAG = 10  # runs that each further lag needs
MAX_DENSE = 60_000_000  # numbers held at once when whitening; beyond, the AR(1) stands


@dataclass(frozen=True, kw_only=True)
class Autoregression:
    """Coefficients (p,) of an AR(p) chosen by AICc."""

    coefficients: Floats

    @property
    def order(self) -> int:
        """Number of coefficients."""
        return len(self.coefficients)

    def autocorrelations(self, n_lags: int) -> Floats:
        """Autocorrelations at lags 1 … n_lags."""
        p = len(self.coefficients)
        rho = np.zeros(max(n_lags, p) + 1)
        rho[: p + 1] = np.concatenate(([1.0], self._first()))
        for lag in range(p + 1, len(rho)):
            rho[lag] = self.coefficients @ rho[lag - 1 : lag - 1 - p : -1] if lag - 1 - p >= 0 else 0.0
        return rho[1 : n_lags + 1]

    def _first(self) -> Floats:
        """Autocorrelations at lags 1 … p, from the Yule-Walker equations."""
        p = len(self.coefficients)
        system, right = np.eye(p), self.coefficients.copy()
        for i in range(p):
            for j in range(p):
                lag = abs(i - j)
                if lag:
                    system[i, lag - 1] -= self.coefficients[j]
        for i in range(p):
            right[i] = self.coefficients[i]
        return np.asarray(np.linalg.solve(system, right))


def ancestors(chains: Chains, n: int, depth: int) -> list[Ints]:
    """For each run the run 1 … depth links back along its chain, −1 for none."""
    previous = np.full(n, -1, dtype=np.int64)
    previous[chains.child] = chains.parent
    found = [previous]
    for _ in range(depth - 1):
        last = found[-1]
        found.append(np.where(last >= 0, previous[np.maximum(last, 0)], -1))
    return found


def autocovariances(x: Floats, chains: Stretches, n_lags: int) -> Floats:
    """Sums of products at lags 0 … n_lags along the chains, over n."""
    sorted_x, n = x[chains.runs], len(x)
    start = np.zeros(n, dtype=np.int64)
    start[chains.offsets] = chains.offsets
    place = np.arange(n) - np.maximum.accumulate(start)
    sums = [float(x @ x)]
    for lag in range(1, n_lags + 1):
        product = sorted_x[lag:] * sorted_x[:-lag]
        sums.append(
            float(product[place[lag:] >= lag].sum()) if len(chains.offsets) > 1 else float(product.sum())
        )
    return np.array(sums) / n


def innovations_of(residual: Floats, chains: Stretches, model: Autoregression) -> Floats:
    """Residuals less what the autoregression predicts; 0 for runs without all their ancestors."""
    back = ancestors(chains, len(residual), model.order)
    error = residual.copy()
    for coefficient, index in zip(model.coefficients, back, strict=True):
        error -= coefficient * np.where(index >= 0, residual[index], 0.0)
    return np.where(back[-1] >= 0, error, 0.0)


def looks_white(error: Floats, chains: Stretches, n_spent: int = 1) -> bool:
    """Ljung-Box test of innovations along the chains, n_spent degrees of freedom spent on coefficients."""
    from scipy.special import chdtrc

    n = len(error)
    if n < MIN_RUNS:
        return True
    n_lags = min(10 + 2 * (n_spent - 1), n // RUNS_A_LAG)
    if n_lags <= n_spent:
        return True
    covariance = autocovariances(error, chains, n_lags)
    if covariance[0] <= 0:
        return True
    r = covariance[1:] / covariance[0]
    statistic = float(n * (n + 2) * (r**2 / (n - np.arange(1, n_lags + 1))).sum())
    return float(chdtrc(float(n_lags - n_spent), statistic)) >= WHITE_LEVEL


def choose_order(residual: Floats, chains: Stretches) -> Autoregression | None:
    """AR(p), 2 ≤ p, by AICc among p = 1 … 12; None where AR(1) is the best."""
    n = len(residual)
    largest = min(MAX_ORDER, n // RUNS_A_LAG)
    gamma = autocovariances(residual, chains, largest)
    best: tuple[float, Floats] | None = None
    phi, variance = np.zeros(0), gamma[0]
    for p in range(1, largest + 1):
        last = (gamma[p] - phi @ gamma[p - 1 : 0 : -1]) / variance if p > 1 else gamma[1] / gamma[0]
        phi = np.concatenate((phi - last * phi[::-1], [last]))
        variance *= max(1 - last * last, 1e-12)
        score = n * np.log(variance) + 2 * (p + 1) * n / (n - p - 2)
        if best is None or score < best[0]:
            best = (score, phi)
    if best is None or len(best[1]) < 2 or not float(best[1].sum()) < 1:
        return None
    return Autoregression(coefficients=best[1])


def whitened_fit(
    y: Floats,
    code: Ints,
    table: Floats,
    c: Floats,
    ridge: Floats,
    chains: Chains,
    model: Autoregression,
    n_fixed: int,
) -> tuple[float, float] | None:
    """Estimate and variance by least squares on whitened runs with all their ancestors; None for too few."""
    n, k = len(y), table.shape[1]
    if n * (k + 1) > MAX_DENSE:
        return None
    back = ancestors(chains, n, len(model.coefficients))
    kept = np.flatnonzero(back[-1] >= 0)
    if len(kept) < n_fixed + MIN_RUNS // 2:
        return None
    rows, right = table[code[kept]], y[kept]
    for coefficient, index in zip(model.coefficients, back, strict=True):
        rows = rows - coefficient * table[code[index[kept]]]
        right = right - coefficient * y[index[kept]]
    gram = rows.T @ rows
    place = np.arange(k)
    gram[place, place] += ridge
    solved = np.linalg.solve(gram, np.column_stack((rows.T @ right, c)))
    rest = right - rows @ solved[:, 0]
    return float(c @ solved[:, 0]), float(c @ solved[:, 1]) * float(rest @ rest) / (len(kept) - n_fixed)
