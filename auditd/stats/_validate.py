"""Arguments to arrays: what is malformed raises `BadInput`, what is too little `NotTestable`.

Nothing here changes its argument, and nothing that passes makes numpy warn later: values are finite, and
small and large enough that squares and their sums stay within double precision.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from numbers import Integral, Real
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from auditd.errors import BadInput, NotTestable

Floats: TypeAlias = NDArray[np.float64]
Integers: TypeAlias = NDArray[np.int64]

# Sums of 1e8 squares must stay below 1.8e308, and squared spreads above 2.2e-308 (IEEE 754 double).
LARGEST_MAGNITUDE = 1e140
SMALLEST_SPREAD = 1e-140
# A column counts as dependent on the others when its singular value, with all columns scaled to length one,
# is below this share of the largest: regression then keeps fewer than four digits.
RANK_TOLERANCE = 1e-12


def vector(x: ArrayLike, name: str, *, n_min: int = 1, varying: bool = False) -> Floats:
    """One-dimensional finite float64 values.

    Parameters
    ----------
    x : array_like of numbers, shape (n,).
    name : the argument's name, for messages.
    n_min : the number of values that the method needs.
    varying : whether constant values cannot be used.

    Raises
    ------
    BadInput : not one-dimensional, not real numbers, not finite, or outside of double precision's squares.
    NotTestable : fewer than `n_min` values, or constant ones where they must vary.
    """
    values = _real_array(x, name)
    if values.ndim != 1:
        raise BadInput(f"{name} has shape {values.shape}; one dimension is expected")
    if values.size < n_min:
        raise NotTestable(f"at least {n_min} values of {name}", f"{values.size}")
    _check_finite(values, name)
    if varying and values.size:
        check_varying(values, name)
    return values


def ascending_times(times: ArrayLike, n: int) -> Floats:
    """Times that never fall, as many as values, counted from the first one.

    Raises
    ------
    BadInput : malformed, another number than `n`, or descending.
    NotTestable : all times are equal.
    """
    clock = vector(times, "times", n_min=2)
    if clock.size != n:
        raise BadInput(f"times has {clock.size} values; {n} are expected")
    falls = clock[1:] < clock[:-1]
    if falls.any():
        raise BadInput(f"times descend at index {int(np.argmax(falls)) + 1}; sort the runs by time first")
    if clock[0] == clock[-1]:
        raise NotTestable("times that differ", f"{n} equal ones")
    return np.asarray(clock - clock[0])


def check_varying(values: Floats, name: str) -> None:
    """Raise when values are constant, or vary by too little to be squared in double precision."""
    spread = float(values.max() - values.min())
    if spread == 0.0:
        raise NotTestable(f"values of {name} that vary", f"{values.size} equal to {values[0]:.6g}")
    if spread < SMALLEST_SPREAD:
        raise BadInput(f"{name} spreads over {spread:.3g}; rescale it to at least {SMALLEST_SPREAD:g}")


def matrix(x: ArrayLike, name: str, *, n_rows: int | None = None) -> Floats:
    """Two-dimensional finite float64 values, with `n_rows` rows if stated.

    Raises
    ------
    BadInput : not two-dimensional, empty, not finite, or another number of rows.
    """
    values = _real_array(x, name)
    if values.ndim != 2:
        raise BadInput(f"{name} has shape {values.shape}; two dimensions are expected")
    if values.size == 0:
        raise BadInput(f"{name} has shape {values.shape}; at least one row and one column are expected")
    if n_rows is not None and values.shape[0] != n_rows:
        raise BadInput(f"{name} has {values.shape[0]} rows; {n_rows} are expected")
    _check_finite(values, name)
    return values


def design_matrix(x: ArrayLike, n_rows: int, name: str = "design") -> Floats:
    """A regression's design of full column rank with fewer columns than rows.

    Raises
    ------
    BadInput : malformed, or its columns are linearly dependent.
    NotTestable : as many columns as rows, or more.
    """
    values = matrix(x, name, n_rows=n_rows)
    p = values.shape[1]
    if n_rows <= p:
        raise NotTestable(f"more rows than the {p} columns of {name}", f"{n_rows}")
    lengths = np.sqrt(np.einsum("ij,ij->j", values, values))
    if np.any(lengths < SMALLEST_SPREAD):
        raise BadInput(f"{name} has a column of zeros: column {int(np.argmin(lengths))}")
    triangle = np.linalg.qr(values / lengths, mode="r")
    singular = np.linalg.svd(triangle, compute_uv=False)
    if singular[-1] < RANK_TOLERANCE * singular[0]:
        raise BadInput(f"{name} has linearly dependent columns; leave out those that repeat others")
    return values


def codes(labels: Iterable[Any], name: str, *, n: int | None = None) -> tuple[Integers, list[Any]]:
    """Labels as codes 0 … k−1, and the k distinct levels that the codes stand for.

    Labels are compared as JSON values: 1 and 1.0 are one level, "1" another. Arrays of one type give sorted
    levels, other sequences give levels in the order in which they first appear.

    Raises
    ------
    BadInput : not one-dimensional, another number than `n`, a missing label (None, NaN, NaT), or one that
        cannot be compared.
    """
    if isinstance(labels, (str, bytes)):
        raise BadInput(f"{name} is one text; a sequence of labels is expected")
    array = labels if isinstance(labels, np.ndarray) else _object_array(labels, name)
    if array.ndim != 1:
        raise BadInput(f"{name} has shape {array.shape}; one dimension is expected")
    if n is not None and array.size != n:
        raise BadInput(f"{name} has {array.size} labels; {n} are expected")
    if array.dtype == object:
        return _object_codes(array, name)
    if array.dtype.kind in "fcmM" and bool(np.any(array != array)):  # noqa: PLR0124  # NaN and NaT differ from themselves
        raise BadInput(
            f"{name} has missing labels (NaN or NaT); name the missing level or leave the runs out"
        )
    levels, inverse = np.unique(array, return_inverse=True)
    return inverse.astype(np.int64), levels.tolist()


def count(value: object, name: str, *, low: int = 1, high: int | None = None) -> int:
    """A whole number from `low` to `high`; raises BadInput otherwise."""
    if isinstance(value, (bool, np.bool_)) or not isinstance(value, (Integral, np.integer)):
        raise BadInput(f"{name} is {value!r}; a whole number is expected")
    whole = int(value)
    if whole < low or (high is not None and whole > high):
        upper = "" if high is None else f" and at most {high}"
        raise BadInput(f"{name} is {whole}; at least {low}{upper} is expected")
    return whole


def number(
    value: object, name: str, *, above: float = -math.inf, below: float = math.inf, closed: bool = False
) -> float:
    """A finite number between two limits (which belong to it when `closed`); raises BadInput otherwise."""
    if isinstance(value, (bool, np.bool_)) or not isinstance(value, (Real, np.floating, np.integer)):
        raise BadInput(f"{name} is {value!r}; a number is expected")
    real = float(value)
    inside = above <= real <= below if closed else above < real < below
    if not math.isfinite(real) or abs(real) > LARGEST_MAGNITUDE or not inside:
        kind = "from" if closed else "between"
        raise BadInput(f"{name} is {real:.6g}; a number {kind} {above:g} and {below:g} is expected")
    return real


def probability(value: object, name: str) -> float:
    """A number strictly between 0 and 1; raises BadInput otherwise."""
    return number(value, name, above=0.0, below=1.0)


def choice(value: object, name: str, options: tuple[str | None, ...]) -> Any:  # Any: one of the options
    """One of the options; raises BadInput otherwise."""
    if value is not None and not isinstance(value, str):
        raise BadInput(f"{name} is {value!r}; one of {options} is expected")
    if value not in options:
        raise BadInput(f"{name} is {value!r}; one of {options} is expected")
    return value


def _real_array(x: ArrayLike, name: str) -> Floats:
    if isinstance(x, np.ma.MaskedArray) and np.ma.is_masked(x):
        raise BadInput(f"{name} has masked values; leave them out first")
    try:
        raw = np.asarray(x)
        if raw.dtype.kind not in "biufO":
            raise BadInput(f"{name} has type {raw.dtype}; real numbers are expected")
        if raw.dtype == object and any(isinstance(v, (str, bytes, complex)) for v in raw.ravel()):
            raise BadInput(f"{name} has values that are not real numbers")
        return np.asarray(raw, dtype=np.float64)
    except (TypeError, ValueError, OverflowError) as error:
        if isinstance(error, BadInput):
            raise
        raise BadInput(f"{name} cannot be read as an array of numbers: {error}") from error


def _check_finite(values: Floats, name: str) -> None:
    if values.size == 0:
        return
    low, high = float(values.min()), float(values.max())
    if not (math.isfinite(low) and math.isfinite(high)):
        n_bad = int(np.count_nonzero(~np.isfinite(values)))
        first = np.argwhere(~np.isfinite(values))[0].tolist()
        raise BadInput(f"{name} has {n_bad} values that are not finite, the first at {first}; leave them out")
    if max(-low, high) > LARGEST_MAGNITUDE:
        raise BadInput(f"{name} reaches {max(-low, high):.3g}; rescale it to at most {LARGEST_MAGNITUDE:g}")


def _object_array(labels: Iterable[Any], name: str) -> NDArray[np.object_]:
    try:
        listed = labels.tolist() if hasattr(labels, "tolist") else list(labels)
    except TypeError as error:
        raise BadInput(f"{name} is {labels!r}; a sequence of labels is expected") from error
    array = np.empty(len(listed), dtype=object)
    array[:] = listed
    return array


def _object_codes(array: NDArray[np.object_], name: str) -> tuple[Integers, list[Any]]:
    seen: dict[Any, int] = {}
    out = np.empty(array.size, dtype=np.int64)
    try:
        for i, label in enumerate(array):
            if label is None or label != label:  # noqa: PLR0124  # NaN and NaT differ from themselves
                raise BadInput(f"{name} has a missing label at {i}; name the missing level or leave it out")
            # True equals 1 in Python but not in JSON.
            key = ("bool", label) if isinstance(label, (bool, np.bool_)) else label
            out[i] = seen.setdefault(key, len(seen))
    except TypeError as error:
        raise BadInput(f"{name} has labels that cannot be compared: {error}") from error
    return out, [key[1] if isinstance(key, tuple) and key[:1] == ("bool",) else key for key in seen]
