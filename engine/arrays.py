"""Array types of the engine, and the border checks that turn a caller's data into them.

Public functions pass what they are given through these once; code behind them trusts it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.errors import InputError

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
ComplexArray = NDArray[np.complex128]
BoolArray = NDArray[np.bool_]
AnyArray = NDArray[np.float64] | NDArray[np.float32] | NDArray[np.complex128] | NDArray[np.complex64]


def as_vector(value: ArrayLike, size: int, name: str | Sequence[str | int]) -> FloatArray:
    """A finite vector, float64, shape (size,).

    Raises
    ------
    InputError
        Wrong shape, not numeric, or not finite.
    """
    return _finite(_real(value, name), name, (size,))


def as_matrix(value: ArrayLike, shape: tuple[int, int], name: str | Sequence[str | int]) -> FloatArray:
    """A finite matrix, float64, of the given shape; a length of -1 stands for any but zero.

    Raises
    ------
    InputError
        Wrong shape, not numeric, empty, or not finite.
    """
    return _finite(_real(value, name), name, shape)


def as_count(value: int, name: str | Sequence[str | int], *, least: int = 1) -> int:
    """A whole number not below `least`.

    Raises
    ------
    InputError
        Not a whole number, or too small.
    """
    if isinstance(value, bool) or not isinstance(value, int | np.integer):
        raise InputError(name, "is not a whole number", "give an integer")
    if value < least:
        raise InputError(name, f"is {value}", f"give at least {least}")
    return int(value)


def as_positive(value: float, name: str | Sequence[str | int], unit: str) -> float:
    """A finite number above zero.

    Raises
    ------
    InputError
        Not a finite number, zero or negative.
    """
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        raise InputError(name, "is not a number", f"give a positive number ({unit})")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not 0 < number < math.inf:
        raise InputError(name, "is not finite and above zero", f"give a finite number above zero ({unit})")
    return number


def as_choice(value: object, choices: Sequence[str], name: str | Sequence[str | int]) -> None:
    """Refuse a word that is not among those known, which would else be taken for another.

    Raises
    ------
    InputError
        Not one of the choices.
    """
    if value not in choices:
        raise InputError(name, "is not a known word", f"give one of {', '.join(choices)}")


def as_indices(value: ArrayLike, size: int, name: str | Sequence[str | int]) -> IntArray:
    """Integer indices of one lattice plane or direction, not all zero; int64, shape (size,).

    Raises
    ------
    InputError
        Wrong length, not whole numbers, all zero, or beyond the bound of an index.
    """
    vector = as_vector(value, size, name)
    whole = np.rint(vector)
    if np.any(whole != vector):
        raise InputError(name, "holds a number that is not whole", "give integer indices")
    if not np.any(whole):
        raise InputError(name, "is all zero, which names no direction", "give at least one index other than 0")
    if np.any(np.abs(whole) > MAX_INDEX):
        raise InputError(name, f"holds an index beyond ±{MAX_INDEX}", "give smaller indices")
    return whole.astype(np.int64)


MAX_INDEX = 2**20
"""Bound of an index: beyond it a phase 2π m·x in double precision loses its tenth digit."""


def refuse_rows(bad: BoolArray, name: str, reason: str, cure: str) -> None:
    """Refuse the rows where `bad` is true.

    Raises
    ------
    InputError
        Naming the column and the first of the rows.
    """
    rows = np.flatnonzero(bad)
    if rows.size:
        raise InputError.for_rows(name, rows, reason, cure)


def _real(value: ArrayLike, name: str | Sequence[str | int]) -> FloatArray:
    try:
        array = np.asarray(value)
    except ValueError as fault:
        raise InputError(name, "has rows of unequal length", "give a rectangular array") from fault
    if array.dtype.kind not in "iuf":
        raise InputError(name, "is not numeric", "give real numbers")
    return np.ascontiguousarray(array, dtype=np.float64)


def _finite(array: FloatArray, name: str | Sequence[str | int], shape: tuple[int, ...]) -> FloatArray:
    wanted = " × ".join("n" if length < 0 else str(length) for length in shape)
    fits = array.ndim == len(shape) and all(
        have == want or (want < 0 and have > 0) for have, want in zip(array.shape, shape, strict=True)
    )
    if not fits:
        have = " × ".join(str(length) for length in array.shape) or "a single number"
        raise InputError(name, f"has the shape {have}", f"give {wanted} numbers")
    bad = np.argwhere(~np.isfinite(array))
    if bad.size:
        place = [int(number) for number in bad[0]]
        path = (name,) if isinstance(name, str) else tuple(name)
        raise InputError((*path, *place), "is not a finite number", "give finite numbers only")
    return array
