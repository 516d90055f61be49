"""The loss of evidence that grades a warning."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from auditd.errors import BadInput
from auditd.evidence.contrast import contrast
from auditd.evidence.distinct import as_parents, originals
from auditd.evidence.inputs import Labels, as_codes, as_nuisances, as_values
from auditd.evidence.number import effective_number
from auditd.evidence.result import EvidenceLoss


def evidence_loss(
    values: object,
    *,
    cells: Labels,
    a: object = None,
    b: object = None,
    nuisance: Mapping[str, Labels] = {},
    blocks: Labels | None = None,
    duplicates: object = None,
    parents: object = None,
    ordered: bool = True,
) -> EvidenceLoss:
    """Loss of evidence of a comparison (with a and b) or of the cells' means (without).

    1 − (variance if the runs were independent) ÷ (mean squared error under the dependence found), not below
    0, with a 95 % interval whose lower end grades a warning. A comparison that cannot be estimated has lost
    everything. Copies and inherited restarts count against a comparison by their share of the effective
    number of its cells.

    Parameters
    ----------
    As in `effective_number` and `contrast`.

    Raises
    ------
    BadInput, NotTestable : as in `effective_number` and `contrast`.
    """
    if (a is None) != (b is None):
        raise BadInput("a and b: give both, or neither")
    if a is None:
        found = effective_number(
            values, cells=cells, nuisance=nuisance, duplicates=duplicates, parents=parents, ordered=ordered
        )
        return _bounded(found.loss, found.loss_low, found.loss_high)
    y = as_values(values)
    n = len(y)
    kept = np.flatnonzero(originals(duplicates, n) == np.arange(n))
    coded = {name: codes.codes[kept] for name, codes in as_nuisances(nuisance, n).items()}
    labels = as_codes(cells, n, "cells")
    seeds = None if blocks is None else as_codes(blocks, n, "blocks").codes[kept]
    result = contrast(
        y[kept],
        cells=[labels.levels[i] for i in labels.codes[kept]],
        a=a,
        b=b,
        nuisance=coded,
        blocks=seeds,
        ordered=ordered,
    )
    if result.loss is None or result.loss_low is None or result.loss_high is None:
        return EvidenceLoss(loss=1.0, low=1.0, high=1.0, estimable=False, reason=result.reason)
    share = len(kept) / n
    if parents is not None:
        as_parents(parents, n)
        share = _left_by_copies(y, labels.codes, duplicates, parents)
    return _bounded(*(1 - (1 - part) * share for part in (result.loss, result.loss_low, result.loss_high)))


def _left_by_copies(y: object, cells: Labels, duplicates: object, parents: object) -> float:
    """What copies and lineage leave of the runs."""
    parts = effective_number(y, cells=cells, duplicates=duplicates, parents=parents).parts
    return parts["duplicates"] * parts["lineage"]


def _bounded(loss: float, low: float, high: float) -> EvidenceLoss:
    """Losses between 0 and 1."""
    inside = [min(max(x, 0.0), 1.0) for x in (loss, low, high)]
    return EvidenceLoss(loss=inside[0], low=inside[1], high=inside[2], estimable=True, reason=None)
