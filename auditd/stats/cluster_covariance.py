"""Covariance of regression coefficients under errors that depend within groups."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from auditd.errors import NotTestable
from auditd.stats._sandwich import bread, sandwich
from auditd.stats._validate import Floats, codes, design_matrix, vector


def cluster_covariance(residuals: ArrayLike, design: ArrayLike, groups: Iterable[Any]) -> Floats:
    """Covariance matrix of least-squares coefficients that holds under any dependence within groups.

    With the usual small-sample factor G / (G − 1) · (n − 1) / (n − p).

    Parameters
    ----------
    residuals : (n,) residuals.
    design : (n, p) regressors with their constant column.
    groups : (n,) labels; errors of different groups are taken as independent.

    Returns
    -------
    array (p, p)
        Symmetric and positive semi-definite.

    Raises
    ------
    BadInput : malformed arrays, dependent columns, missing labels.
    NotTestable : fewer than two groups, or as many columns as rows or more.

    Assumptions
    -----------
    Many groups of similar size: below about 30 the variances come out too small, below 10 badly so.

    References
    ----------
    Liang, K.-Y. and Zeger, S. L. (1986), Biometrika 73:13-22. Cameron, A. C. and Miller, D. L. (2015), J.
    Human Resources 50:317-372, section II.
    """
    e = vector(residuals, "residuals", n_min=2)
    n = e.size
    columns = design_matrix(design, n)
    labels, levels = codes(groups, "groups", n=n)
    n_groups, p = len(levels), columns.shape[1]
    if n_groups < 2:
        raise NotTestable("at least 2 groups", n_groups)
    unscaled, scale = bread(columns)
    sums = np.column_stack(
        [np.bincount(labels, weights=columns[:, j] / scale[j] * e, minlength=n_groups) for j in range(p)]
    )
    factor = n_groups / (n_groups - 1.0) * (n - 1.0) / (n - p)
    return sandwich(unscaled, factor * (sums.T @ sums), scale)
