"""Arguments of the public functions, checked once and turned into arrays of numbers and of codes."""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from auditd.errors import BadInput, NotTestable

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]
Labels = Sequence[Hashable] | npt.NDArray[Any]  # labels are JSON values of any kind

NO_ORDER = "no order is known, so dependence in time is not counted"
CONSTANT = 1e-14  # spread ÷ size below which values differ by rounding only
LARGEST = 1e150  # squares beyond this leave the range of a float64


@dataclass(frozen=True, kw_only=True)
class Codes:
    """Labels as integers 0 … len(levels) − 1, in the order in which the levels appear."""

    codes: Ints
    levels: tuple[Hashable, ...]

    @property
    def n_levels(self) -> int:
        """How many levels occur."""
        return len(self.levels)

    def index(self, level: Hashable) -> int | None:
        """Code of a level, or None where it does not occur."""
        return next((i for i, known in enumerate(self.levels) if known == level), None)


def as_values(values: object) -> Floats:
    """Check and convert one response.

    Raises BadInput where the array is not one-dimensional, not numeric, not finite, or too large to be
    squared.
    """
    try:
        array = np.asarray(values)
    except (TypeError, ValueError) as error:
        raise BadInput(f"values: not an array of numbers ({error})") from error
    if array.ndim != 1:
        raise BadInput(f"values: expected one dimension, got shape {array.shape}")
    if array.dtype.kind not in "fiub":
        array = _from_objects(array)
    result = array.astype(np.float64)
    n_bad = int(result.size - np.isfinite(result).sum())
    if n_bad:
        raise BadInput(
            f"values: {n_bad} of {result.size} are NaN or infinite; leave such runs out and count them apart"
        )
    if result.size and float(np.abs(result).max()) > LARGEST:
        raise BadInput(f"values: larger than {LARGEST:g} in size; rescale them")
    return result


def standardise(y: Floats) -> tuple[Floats, float]:
    """Values less their mean, in standard deviations, and that deviation; zeros if all are equal."""
    centred = y - y.mean()
    size = float(np.abs(centred).max(initial=0.0))
    if size <= 0:
        return centred, 0.0
    inside = centred / size
    spread = float(inside.std())
    return inside / spread, size * spread


def _from_objects(array: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """Numbers held as Python objects, as numbers; text and everything else is refused."""
    if array.dtype.kind == "O" and all(isinstance(item, int | float | np.number) for item in array.tolist()):
        try:
            return array.astype(np.float64)
        except (TypeError, ValueError, OverflowError) as error:
            raise BadInput(f"values: not all numbers ({error})") from error
    if array.size == 0:
        return array.astype(np.float64)
    raise BadInput(f"values: expected numbers, got an array of {array.dtype}")


def as_codes(labels: object, n: int, name: str) -> Codes:
    """Code one label a run; `name` is used in messages.

    Raises BadInput where the labels are not one a run, are NaN, or cannot be compared.
    """
    if isinstance(labels, str | bytes) or not hasattr(labels, "__len__"):
        raise BadInput(f"{name}: expected a sequence of labels, one a run, got {type(labels).__name__}")
    if isinstance(labels, np.ndarray) and labels.ndim != 1:
        raise BadInput(f"{name}: expected one dimension, got shape {labels.shape}")
    items = labels.tolist() if isinstance(labels, np.ndarray) else list(labels)  # type: ignore[call-overload]
    if len(items) != n:
        raise BadInput(f"{name}: expected {n} labels, one a run, got {len(items)}")
    try:
        lookup = {level: code for code, level in enumerate(dict.fromkeys(items))}
    except TypeError as error:
        raise BadInput(f"{name}: labels must be hashable ({error})") from error
    if any(isinstance(level, float) and level != level for level in lookup):  # noqa: PLR0124  (NaN)
        raise BadInput(f"{name}: a label is NaN; give missing labels a name of their own")
    codes = np.fromiter(map(lookup.__getitem__, items), np.int64, n)
    return Codes(codes=codes, levels=tuple(lookup))


def as_nuisances(nuisance: object, n: int) -> dict[str, Codes]:
    """Code every nuisance; those with a single level say nothing and are left out."""
    if not isinstance(nuisance, Mapping):
        raise BadInput(f"nuisance: expected a mapping from name to labels, got {type(nuisance).__name__}")
    coded = {str(name): as_codes(labels, n, f"nuisance {name}") for name, labels in nuisance.items()}
    return {name: codes for name, codes in coded.items() if codes.n_levels > 1}


def as_side(side: object, cells: Codes, name: str) -> list[int | None]:
    """Codes of a label or of a list of labels; None for a label that does not occur."""
    if isinstance(side, list | np.ndarray) or (
        isinstance(side, tuple)
        and cells.index(side) is None
        and all(cells.index(i) is not None for i in side)
    ):
        labels = list(side)
    else:
        labels = [side]
    if not labels:
        raise BadInput(f"{name}: an empty list of cells")
    try:
        if len(set(labels)) != len(labels):
            raise BadInput(f"{name}: a cell is listed twice")
    except TypeError as error:
        raise BadInput(f"{name}: labels must be hashable ({error})") from error
    return [cells.index(label) for label in labels]


def matched_sides(a: object, b: object, cells: Codes) -> tuple[list[int], list[int], int]:
    """Codes of the two sides' cells, and how many cells were left out.

    Lists of equal length are matched by place: where one of a pair has no runs, both stay out. Lists of
    different length are not matched: cells without runs stay out by themselves.
    """
    side_a, side_b = as_side(a, cells, "a"), as_side(b, cells, "b")
    if set(filter(lambda code: code is not None, side_a)) & set(side_b):
        raise BadInput("a and b share a cell; a cell cannot be compared with itself")
    n_listed = len(side_a) + len(side_b)
    if len(side_a) == len(side_b):
        pairs = [(i, j) for i, j in zip(side_a, side_b, strict=True) if i is not None and j is not None]
        kept_a, kept_b = [i for i, _ in pairs], [j for _, j in pairs]
    else:
        kept_a, kept_b = [i for i in side_a if i is not None], [j for j in side_b if j is not None]
    if not kept_a or not kept_b:
        raise NotTestable(
            "runs in the cells of both sides",
            f"cells present: {cells.n_levels}, of the two sides' none matched",
        )
    return kept_a, kept_b, n_listed - len(kept_a) - len(kept_b)


def as_confidence(confidence: object) -> float:
    """Check a level of confidence, between 0.5 and 1."""
    if isinstance(confidence, bool) or not isinstance(confidence, int | float | np.number):
        raise BadInput(f"confidence: expected a number, got {type(confidence).__name__}")
    level = float(confidence)
    if not 0.5 <= level < 1.0:
        raise BadInput(f"confidence: expected 0.5 <= confidence < 1, got {level:g}")
    return level
