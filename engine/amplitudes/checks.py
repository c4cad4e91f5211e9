"""Border checks that the steps from intensities to amplitudes share."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, as_vector
from engine.errors import InputError
from engine.reflections import Reflections


def require_intensities(reflections: Reflections) -> None:
    """Refuse amplitudes where only intensities make sense.

    Raises
    ------
    InputError
        The reflections carry amplitudes.
    """
    if reflections.quantity != "intensity":
        raise InputError("reflections", "carry amplitudes", "give the intensities they were made from")


def require_sigma(reflections: Reflections) -> FloatArray:
    """σ of every reflection, above zero; shape (N,).

    Raises
    ------
    InputError
        No σ, or one that is not above zero.
    """
    if reflections.sigma is None:
        raise InputError("sigma", "is absent", "give the standard uncertainty of every reflection")
    bad = np.flatnonzero(~(reflections.sigma > 0))
    if bad.size:
        raise InputError.for_rows(
            "sigma", reflections.row[bad], "is not above zero", "give σ > 0 or leave the rows out"
        )
    return reflections.sigma


def require_no_zero_term(reflections: Reflections) -> None:
    """Refuse the reflection 000, which lies under the primary beam and obeys no statistics.

    Raises
    ------
    InputError
        All indices of a row are zero.
    """
    zero = np.flatnonzero(~reflections.indices.any(axis=1))
    if zero.size:
        raise InputError.for_rows("indices", reflections.row[zero], "are those of the zero term", "leave it out here")


def as_weights(values: ArrayLike | None, reflections: Reflections, name: str) -> FloatArray:
    """Numbers above zero, one a reflection, or ones where none are given; float64, shape (N,).

    Raises
    ------
    InputError
        Wrong length, not finite, or not above zero.
    """
    if values is None:
        return np.ones(reflections.count)
    vector = as_vector(values, reflections.count, name)
    bad = np.flatnonzero(vector <= 0)
    if bad.size:
        raise InputError.for_rows(name, reflections.row[bad], "is not above zero", "give numbers above zero")
    return vector


def as_flags(values: ArrayLike | None, reflections: Reflections, name: str) -> BoolArray:
    """Truth values, one a reflection, or all false where none are given; bool, shape (N,).

    Raises
    ------
    InputError
        Wrong length, or not truth values.
    """
    if values is None:
        return np.zeros(reflections.count, dtype=bool)
    flags = np.asarray(values)
    if flags.dtype != np.bool_ or flags.shape != (reflections.count,):
        raise InputError(name, "is not one truth value a reflection", f"give {reflections.count} of true or false")
    return flags
