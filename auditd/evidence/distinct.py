"""Which runs are copies of others, and which run is whose parent."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput
from auditd.evidence.chains import Chains
from auditd.evidence.inputs import Ints, as_codes

MAX_DEPTH_STEPS = 64  # pointer doublings: enough for chains of 2**64 runs


def originals(duplicates: object, n: int) -> Ints:
    """Index of the first of each run's copies (its own index for a run that copies none).

    Parameters
    ----------
    duplicates : None; or (n,) booleans, True for a copy of some earlier run; or (n,) integers with −1 for a
        run that is no copy and otherwise the index of the run copied; or (n,) labels without −1, the same
        label for copies of one run.
    """
    index = np.arange(n, dtype=np.int64)
    if duplicates is None:
        return index
    array = np.asarray(duplicates)
    if array.shape != (n,):
        raise BadInput(f"duplicates: expected shape ({n},), got {array.shape}")
    if array.dtype.kind == "b":
        return np.where(array, -1, index)
    if array.dtype.kind in "iu" and array.size and (array == -1).any():
        return roots(as_parents(array, n, "duplicates"))
    codes = as_codes(duplicates, n, "duplicates").codes
    first = np.full(int(codes.max(initial=-1)) + 1, n, dtype=np.int64)
    np.minimum.at(first, codes, index)
    return first[codes]


def as_parents(parents: object, n: int, name: str = "parents") -> Ints:
    """Check indices of parents: integers from −1 (none) to n − 1, without cycles."""
    array: npt.NDArray[np.generic] = np.asarray(parents)
    if array.shape != (n,):
        raise BadInput(f"{name}: expected shape ({n},), got {array.shape}")
    if array.dtype.kind not in "iu":
        raise BadInput(f"{name}: expected integers, −1 for none, got {array.dtype}")
    index = array.astype(np.int64)
    if n and (int(index.min()) < -1 or int(index.max()) >= n):
        raise BadInput(
            f"{name}: expected indices from −1 to {n - 1}, got {int(index.min())} to {int(index.max())}"
        )
    own = np.arange(n, dtype=np.int64)
    if (index == own).any():
        raise BadInput(f"{name}: run {int(own[index == own][0])} is its own parent")
    return index


def roots(parents: Ints) -> Ints:
    """First ancestor of each run, by pointer doubling. Raises BadInput on a cycle."""
    index = np.arange(len(parents), dtype=np.int64)
    above = np.where(parents < 0, index, parents)
    for _ in range(MAX_DEPTH_STEPS):
        further = above[above]
        if (further == above).all():
            break
        above = further
    if (parents[above] >= 0).any():
        raise BadInput(f"parents: a cycle through run {int(above[parents[above] >= 0][0])}")
    return above


def lineage(parents: Ints, original: Ints, kept: Ints) -> Chains | None:
    """Links child ← parent among the kept runs; None where no kept run has a kept parent of its own."""
    place = np.full(len(parents), -1, dtype=np.int64)
    place[kept] = np.arange(len(kept))
    parent = parents[kept]
    resolved = np.where(parent >= 0, original[np.maximum(parent, 0)], -1)
    moved = np.where(resolved >= 0, place[np.maximum(resolved, 0)], -1)
    own = np.arange(len(kept), dtype=np.int64)
    moved = np.where(moved == own, -1, moved)
    roots(moved)
    child = np.flatnonzero(moved >= 0)
    if not len(child):
        return None
    return Chains(along="lineage", child=child, parent=moved[child], starts=np.flatnonzero(moved < 0))
