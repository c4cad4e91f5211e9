"""Checks of columns that have one entry a reflection or an atom."""

from __future__ import annotations

import numpy as np

from engine.arrays import ComplexArray, FloatArray, refuse_rows
from engine.errors import InputError
from engine.reflections import Reflections


def amplitudes(reflections: Reflections) -> FloatArray:
    """The measured |F|, (N,).

    Raises
    ------
    InputError
        The reflections carry intensities, or a negative or infinite amplitude, or are none.
    """
    if reflections.quantity != "amplitude":
        raise InputError(
            "quantity", "is intensity, which noise may make negative", "turn the intensities into amplitudes first"
        )
    if not reflections.count:
        raise InputError("reflections", "are none", "give at least one reflection")
    observed = reflections.observed
    refuse_rows(
        ~((observed >= 0) & (observed < np.inf)), "observed", "is not an amplitude", "give numbers of 0 or more"
    )
    return observed


def calculated_for(reflections: Reflections, calculated: ComplexArray) -> ComplexArray:
    """Structure factors of a model, one for each reflection, complex128, (N,).

    Raises
    ------
    InputError
        Another number of them, not finite.
    """
    factors = np.asarray(calculated, dtype=np.complex128)
    if factors.shape != (reflections.count,):
        raise InputError(
            "calculated",
            f"has the shape {factors.shape} for {reflections.count} reflections",
            "give the structure factors of the same indices in the same order",
        )
    refuse_rows(~np.isfinite(factors), "calculated", "is not finite", "give finite structure factors")
    return factors
