"""Runs as they enter the audit: validated arrays and labels."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class RunBlock:
    """Consecutive runs in audit order.

    Attributes
    ----------
    values : (n,) response; not finite where there is none.
    cells : labels of the cells, n of them.
    ids : run ids, n of them.
    nuisance : labels by nuisance.
    times : (n,) POSIX seconds or None.
    parents : (n,) 0-based index of the parent in the epoch, −1 for none, or None.
    design : (n, p) or None.
    """

    values: FloatArray
    cells: Sequence[str]
    ids: Sequence[str]
    nuisance: Mapping[str, Sequence[str]]
    times: FloatArray | None
    parents: IntArray | None
    design: FloatArray | None


def run_block(
    values: npt.ArrayLike,
    cells: object,
    *,
    ids: object,
    nuisance: Mapping[str, object],
    times: object = None,
    parents: object = None,
    design: object = None,
) -> RunBlock:
    """Validate one block of runs; BadInput says what is malformed."""
    y = numbers(values, "values", ndim=1)
    n = y.size
    return RunBlock(
        values=y,
        cells=labels(cells, "cells", n),
        ids=labels(ids, "ids", n),
        nuisance={name: labels(given, f"nuisance {name!r}", n) for name, given in nuisance.items()},
        times=None if times is None else _of_length(numbers(times, "times", ndim=1), "times", n),
        parents=None if parents is None else _parents(parents, n),
        design=None if design is None else _design(design, n),
    )


def numbers(given: object, name: str, *, ndim: int) -> FloatArray:
    """Give a float64 array of the stated dimension, or raise BadInput."""
    try:
        array = np.asarray(given)
        is_number = array.dtype.kind in "biufO"
        array = array.astype(np.float64) if is_number else array
    except (TypeError, ValueError) as error:
        raise BadInput(f"{name} must be numbers: {error}") from error
    if not is_number:
        raise BadInput(f"{name} must be numbers, got {array.dtype}")
    if array.ndim != ndim:
        raise BadInput(f"{name} must have {ndim} dimension(s), got shape {array.shape}")
    return array


def labels(given: object, name: str, n: int) -> list[str]:
    """Give n labels as text, or raise BadInput."""
    if isinstance(given, str | bytes):
        raise BadInput(f"{name} must be an array of {n} labels, got one text")
    if isinstance(given, list) and (not given or isinstance(given[0], str)):
        listed = given
    else:
        array = np.asarray(given)
        if array.ndim != 1:
            raise BadInput(f"{name} must have one dimension, got shape {array.shape}")
        listed = array.tolist()
    if len(listed) != n:
        raise BadInput(f"{name} has {len(listed)} labels for {n} values")
    return [label if type(label) is str else str(label) for label in listed]


def _of_length(array: FloatArray, name: str, n: int) -> FloatArray:
    if array.size != n:
        raise BadInput(f"{name} has {array.size} entries for {n} values")
    return array


def _parents(given: object, n: int) -> IntArray:
    array = _of_length(numbers(given, "parents", ndim=1), "parents", n)
    if not np.isfinite(array).all() or (array != np.floor(array)).any() or (array < -1).any():
        raise BadInput("parents must be whole numbers: the index of the parent, or -1 for none")
    return array.astype(np.int64)


def _design(given: object, n: int) -> FloatArray:
    array = numbers(given, "design", ndim=2)
    if array.shape[0] != n:
        raise BadInput(f"design has {array.shape[0]} rows for {n} values")
    if not np.isfinite(array).all():
        raise BadInput("design holds entries that are not finite")
    return array
