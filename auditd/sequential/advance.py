"""What an audit is given again, and what it gives back."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from auditd.sequential.alarm import Alarm, Key

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class Advanced:
    """What the audit says of a block of runs.

    Attributes
    ----------
    first : index of the block's first run in the epoch.
    scores : (n,) z, NaN where a run is not scored.
    log_e : log e-value after each run, by (kind, along).
    log_mean : (n,) log of the sum of the families' e-values over K: below the mean of all K of the epoch.
    alarms : alarms raised in the block.
    """

    first: int
    scores: FloatArray
    log_e: dict[Key, FloatArray]
    log_mean: FloatArray
    alarms: tuple[Alarm, ...]


@dataclass(frozen=True, kw_only=True)
class EarlierRuns:
    """Stored runs of an epoch, in order, as `Auditor.advance` takes them."""

    values: npt.ArrayLike
    cells: object
    ids: object
    nuisance: Mapping[str, object]
    times: object = None
    parents: object = None
    design: object = None
