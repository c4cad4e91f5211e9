"""What the uncertainty of a scale does to a density: one density for each independent error.

An error of the scale moves all coefficients of a set together. A density that such an error changes by one
standard deviation is itself a Fourier series; the squares of these series add up to the variance, exactly to
first order, beside that of the coefficients' own errors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from engine.arrays import AnyArray, ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.combination.gathering import Gathered
from engine.errors import InputError
from engine.evaluate import evaluate
from engine.fields import Treatment
from engine.sampling.grids import Sampling
from engine.synthesis import Demand

SCALES_OMITTED = "the uncertainty of the scales of the sets to each other"
"""What the errors of coefficients leave to the modes."""
SCALES_APART = "the uncertainty of the scales is not in the errors of the coefficients; the scale modes carry it"


def scale_modes(
    gathered: Gathered, terms: IntArray, contributions: Sequence[ComplexArray], result: CoefficientSet
) -> tuple[CoefficientSet, ...]:
    """The densities by which one σ of each independent error of the scales moves a result.

    Parameters
    ----------
    terms : int64, shape (N,)
        Of the result.
    contributions : sequence of complex128, shape (N,)
        What each set adds to the result.

    Notes
    -----
    A set that was fitted to the first has the error of its fit; the scale of the first is then that of all
    and not among these. Sets that were not fitted have their own errors, taken as independent.
    """
    moved: list[ComplexArray] = []
    lattice, indices = gathered.leader.lattice, gathered.indices[terms]
    zero = gathered.zero[terms]
    for number, (one, scale) in enumerate(zip(gathered.sets, gathered.scales, strict=True)):
        changes: list[FloatArray] = list(scale.displacements(lattice, indices))
        if gathered.choice.kind != "fitted" and one.scale_sigma:
            changes.append(np.full(terms.size, one.scale_sigma))
        for change in changes:
            # A mean that was given does not depend on the scale of the measured terms.
            free = zero if one.tally.zero_term == "given" else np.zeros_like(zero)
            moved.append(np.where(free, 0, change * contributions[number]))
    return tuple(
        replace(result, values=one, sigma=None, phase_sigma=None, plane_errors=None, scale_sigma=0.0) for one in moved
    )


def with_scale_errors(result: CoefficientSet, modes: Sequence[CoefficientSet]) -> CoefficientSet:
    """A combined set whose uncertainties contain those of the scales.

    Parameters
    ----------
    modes : sequence of CoefficientSet
        Such as `Combined.scale_modes`, with the indices of the result.
    """
    if not modes:
        return result
    errors = result.plane_errors
    if errors is not None:
        left = tuple(one for one in errors.omits if one != SCALES_OMITTED)
        errors = replace(errors, omits=left)
    shared = np.stack([mode.values for mode in modes], axis=1)
    return replace(result, plane_errors=errors, common_errors=shared)


def scale_sigma_of(
    modes: Sequence[CoefficientSet],
    sampling: Sampling,
    treatment: Treatment | None = None,
    demand: Demand | None = None,
) -> FloatArray:
    """σ of a field by the uncertainty of the scales alone; of a complex field the root of ⟨|δn|²⟩.

    It adds in squares to the σ of the coefficients' errors.

    Parameters
    ----------
    modes : sequence of CoefficientSet
        Such as `Combined.scale_modes`; at least one.
    sampling, treatment, demand
        Those of the field.

    Returns
    -------
    float64, the shape of the field's values

    Raises
    ------
    InputError
        No modes, or a field that is not linear in the coefficients.
    """
    if not modes:
        raise InputError("modes", "is empty: no scale has an uncertainty", "leave it out")
    treatment = treatment or Treatment()
    if treatment.field not in ("density", "gradient", "laplacian"):
        raise InputError("field", f"{treatment.field} is not linear in the coefficients", "choose another field")
    total: AnyArray | None = None
    for mode in modes:
        square = np.abs(evaluate(mode, sampling, treatment, demand).values) ** 2
        total = square if total is None else total + square
    return np.sqrt(np.asarray(total, dtype=np.float64))
