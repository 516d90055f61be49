"""A nuisance with very many levels: levels are clusters, and the variance is taken from their sums.

Runs of one level are given an exchangeable correlation, and the variance of the estimate comes from the
levels' own scores, so that it holds whatever the dependence within a level is (serial, interaction, unequal
spread), as long as levels are many.

References
----------
Liang & Zeger (1986), Biometrika 73:13-22; Bell & McCaffrey (2002), Survey Methodology 28:169-181 (degrees
of freedom).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditd.evidence.inputs import Floats, Ints


@dataclass(frozen=True, kw_only=True)
class Clustered:
    """Estimate of the contrast, its variance and degrees of freedom, and the intraclass correlation."""

    estimate: float
    variance: float
    df: float
    icc: float


def by_cluster(y: Floats, cell: Ints, cluster: Ints, contrast: Floats) -> Clustered:
    """Generalised estimating equations with exchangeable correlation within clusters.

    Parameters
    ----------
    y : (n,). cell, cluster : (n,) codes. contrast : (n_cells,) weights.
    """
    n_cells, n_clusters = len(contrast), int(cluster.max()) + 1
    slot = cluster * n_cells + cell
    count = np.bincount(slot, minlength=n_clusters * n_cells).reshape(n_clusters, n_cells).astype(float)
    total = np.bincount(slot, y, n_clusters * n_cells).reshape(n_clusters, n_cells)
    size = count.sum(1)
    mean = total.sum(0) / count.sum(0)
    residual = y - mean[cell]
    icc_ratio = _variance_ratio(residual, cluster, size, n_cells)
    shrink = icc_ratio / (1 + icc_ratio * size)
    gram = np.diag(count.sum(0)) - (count.T * shrink) @ count
    right = total.sum(0) - (count.T * shrink) @ total.sum(1)
    beta = np.linalg.solve(gram, right)
    leverage = np.linalg.solve(gram, contrast)
    rest = total - count * beta
    score = rest @ leverage - shrink * (count @ leverage) * rest.sum(1)
    pull = (count @ leverage**2) - shrink * (count @ leverage) ** 2
    n_pulling = int((pull > 1e-12 * pull.max()).sum())
    return Clustered(
        estimate=float(contrast @ beta),
        variance=float(score @ score) * n_pulling / max(n_pulling - 1, 1),
        df=max(float(pull.sum() ** 2 / (pull @ pull)) - 1, 1.0),
        icc=icc_ratio / (1 + icc_ratio),
    )


def _variance_ratio(residual: Floats, cluster: Ints, size: Floats, n_cells: int) -> float:
    """Level variance ÷ error variance by the analysis of variance (Searle 1971, chapter 10), not below 0."""
    n, n_clusters = float(size.sum()), len(size)
    level = np.bincount(cluster, residual, n_clusters) / size
    within = float(((residual - level[cluster]) ** 2).sum())
    between = float((size * level**2).sum())
    df_within, df_between = n - n_clusters, max(n_clusters - n_cells, 1)
    if df_within <= 0 or within <= 0:
        return 0.0
    typical = (n - float((size**2).sum()) / n) / (n_clusters - 1)
    return max((between / df_between) / (within / df_within) - 1, 0.0) / typical
